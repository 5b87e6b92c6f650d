package line

import (
	"errors"
	"fmt"
	"io"
	"sync"
	"time"
)

// Port is a byte port of this machine. Read returns within some 20 ms, with
// (0, nil) when nothing came; its error means that the port is gone. Read and
// Write are called by one goroutine each, Close by a third while they are
// under way: it frees Read, may be called again, and no Write begins after it.
type Port interface {
	io.ReadWriteCloser
}

// ModemLine is one of the two lines of a serial port that the program may put
// on and off, and on which a relay can hang.
type ModemLine uint8

// The modem lines.
const (
	RTS ModemLine = iota + 1 // request to send
	DTR                      // data terminal ready
)

func (m ModemLine) String() string {
	if m == DTR {
		return "DTR"
	}
	return "RTS"
}

// ModemLines is a Port that has modem lines. Its call belongs to the goroutine
// that writes.
type ModemLines interface {
	SetModemLine(which ModemLine, on bool) error
}

// ErrNoModemLines: a port that has none, such as a pseudo-terminal.
var ErrNoModemLines = errors.New("it has no modem lines: a relay needs a port with RTS and DTR")

// ErrSpinning: a port whose reads return at once with nothing, as those of an
// unplugged adapter may; it is gone.
var ErrSpinning = errors.New("its reads return at once with nothing")

// fastReads empty reads in a row, each faster than fastRead, mean that a port
// is gone (common practice, no source).
const (
	fastReads = 50
	fastRead  = time.Millisecond
)

// waitingWrites is how many writes may wait for a port.
const waitingWrites = 64

// connection is an attached port with its two goroutines.
type connection struct {
	inbox  *Real
	id     PortID
	port   Port
	writes chan outgoing
	ended  bool // the writer takes no more; under the inbox's lock

	once sync.Once
	quit chan struct{}

	readEnded, writeEnded, shutEnded chan struct{}
	shutOnce                         sync.Once
	shutErr                          error // valid after shutEnded
}

type outgoing struct {
	number int64
	data   []byte
	modem  ModemLine // not 0: to be put on or off, and no data
	on     bool
}

func newConnection(r *Real, id PortID, p Port) *connection {
	return &connection{
		inbox: r, id: id, port: p, writes: make(chan outgoing, waitingWrites), quit: make(chan struct{}),
		readEnded: make(chan struct{}), writeEnded: make(chan struct{}), shutEnded: make(chan struct{}),
	}
}

// stop asks both goroutines to end.
func (c *connection) stop() { c.once.Do(func() { close(c.quit) }) }

func (c *connection) stopped() bool {
	select {
	case <-c.quit:
		return true
	default:
		return false
	}
}

// shut closes the port, once.
func (c *connection) shut() {
	c.shutOnce.Do(func() {
		defer close(c.shutEnded)
		c.shutErr = c.port.Close()
	})
}

func (c *connection) read() {
	defer close(c.readEnded)
	buffer := make([]byte, 4096)
	fast := 0
	for !c.stopped() {
		begun := time.Now()
		n, err := c.port.Read(buffer)
		if n > 0 {
			// A copy: the engine takes it when it likes.
			c.inbox.Post(0, Event{Kind: KindBytes, Port: c.id, Data: append([]byte(nil), buffer[:n]...)})
		}
		switch {
		case n > 0 || time.Since(begun) >= fastRead:
			fast = 0
		default:
			fast++
		}
		if err == nil && fast == fastReads {
			err = ErrSpinning
		}
		if err != nil {
			c.leave(err)
			return
		}
	}
}

// leave tells that the port is gone, unless it is being closed anyway, and
// gives it back to the system, which keeps descriptors of dead ports.
func (c *connection) leave(err error) {
	if c.stopped() {
		return
	}
	c.inbox.mu.Lock()
	c.ended = true
	c.inbox.put(Event{Kind: KindGone, Port: c.id, Err: fmt.Errorf("%w: %w", ErrGone, err)})
	c.inbox.mu.Unlock()
	c.stop()
	c.shut()
}

func (c *connection) write() {
	defer close(c.writeEnded)
	for !c.stopped() { // which a select would weigh equally with a write
		select {
		case w := <-c.writes:
			c.carryOut(w)
		case <-c.quit:
		}
	}
	c.finish()
}

// finish deals with the writes that still wait: of a port that is gone they
// fail, of a port that is being closed they go out.
func (c *connection) finish() {
	c.inbox.mu.Lock()
	gone := c.ended
	c.ended = true
	c.inbox.mu.Unlock()
	for {
		select {
		case w := <-c.writes:
			if gone {
				c.report(w, ErrGone)
			} else {
				c.carryOut(w)
			}
		default:
			return
		}
	}
}

func (c *connection) carryOut(w outgoing) {
	if w.modem != 0 {
		err := error(ErrNoModemLines)
		if lines, ok := c.port.(ModemLines); ok {
			err = lines.SetModemLine(w.modem, w.on)
		}
		c.report(w, err)
		return
	}
	for data := w.data; len(data) > 0; {
		n, err := c.port.Write(data)
		if err == nil && (n <= 0 || n > len(data)) {
			err = io.ErrShortWrite
		}
		if err != nil {
			c.report(w, err)
			return
		}
		data = data[n:]
	}
	c.report(w, nil)
}

func (c *connection) report(w outgoing, err error) {
	c.inbox.Post(0, Event{Kind: KindWritten, Port: c.id, Number: w.number, Err: err})
}
