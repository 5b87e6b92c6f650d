package record

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"sync"
	"time"

	"kymobench/bench/line"
)

// Poster takes the events of a committer; every line.Inbox is one.
type Poster interface {
	Post(delay time.Duration, e line.Event)
}

// Committer brings a writer's lines to the disk and posts a KindDurable event
// when they are there: a Disk or a Simulated. One serves one writer.
type Committer interface {
	begin(f file) error
	// put takes a line; it never waits for the disk.
	put(number int64, text []byte) error
	// taken hears that the engine took the durable event of a line.
	taken(number int64)
	// settle waits until everything put is on the disk.
	settle(ctx context.Context) error
	// end stops and closes the file.
	end(ctx context.Context) error
}

var errCommitterUsed = errors.New("committer serves another record already")

// mostWaiting is how many bytes may wait for a disk that does not answer.
// A run's record is under 2 MB, so this is reached by a dead disk alone.
const mostWaiting = 64 << 20

// Disk is the committer of real runs. Its own goroutine takes all lines that
// wait, writes them with one write and one sync, posts the durable event of
// the last of them, and begins again. So the engine never waits for the disk,
// and a slow disk makes bigger bites instead of a longer queue of syncs. A
// timer that syncs every so often was slower by a factor of a hundred for the
// reading that waits to be judged.
//
// After the first error nothing is written any more and no line is called
// durable: what a second sync after a failed one says is not true. The error
// comes as a durable event with Err, and from every call.
type Disk struct {
	inbox Poster
	most  int // bytes that may wait
	f     file
	wake  chan struct{} // holds at most one
	done  chan struct{}

	mu      sync.Mutex
	waiting []byte
	last    int64         // number of the last line put
	durable int64         // number of the last line synced
	quiet   chan struct{} // closed when durable reaches last, or at an error
	err     error
}

// NewDisk returns a committer that posts to inbox.
func NewDisk(inbox Poster) *Disk { return &Disk{inbox: inbox, most: mostWaiting} }

func (c *Disk) begin(f file) error {
	if c.f != nil {
		return errCommitterUsed
	}
	c.f = f
	c.wake = make(chan struct{}, 1)
	c.done = make(chan struct{})
	go c.run()
	return nil
}

func (c *Disk) run() {
	defer close(c.done)
	var bite []byte
	for range c.wake {
		for {
			c.mu.Lock()
			bite, c.waiting = c.waiting, bite[:0]
			last, err := c.last, c.err
			c.mu.Unlock()
			if len(bite) == 0 || err != nil {
				break
			}
			if _, err = c.f.Write(bite); err == nil {
				err = c.f.Sync()
			}
			c.ended(last, err)
		}
	}
}

// ended notes how a bite ended and tells the inbox.
func (c *Disk) ended(last int64, err error) {
	e := line.Event{Kind: line.KindDurable, Number: last}
	c.mu.Lock()
	switch {
	case c.err != nil: // put gave up meanwhile; no line is acknowledged after an error
		e = line.Event{Kind: line.KindDurable, Err: c.err}
	case err != nil:
		c.err = fmt.Errorf("write record: %w", err)
		e = line.Event{Kind: line.KindDurable, Err: c.err}
	default:
		c.durable = last
	}
	if c.quiet != nil && (c.err != nil || c.durable == c.last) {
		close(c.quiet)
		c.quiet = nil
	}
	c.mu.Unlock()
	c.inbox.Post(0, e)
}

func (c *Disk) put(number int64, text []byte) error {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.err == nil && len(c.waiting)+len(text) > c.most {
		c.err = fmt.Errorf("write record: %w: %d bytes wait", ErrBehind, len(c.waiting))
	}
	if c.err != nil {
		return c.err
	}
	c.waiting = append(c.waiting, text...)
	c.last = number
	select {
	case c.wake <- struct{}{}:
	default: // it is awake, or will be
	}
	return nil
}

func (c *Disk) taken(int64) {}

func (c *Disk) settle(ctx context.Context) error {
	c.mu.Lock()
	if c.err != nil || c.durable == c.last {
		defer c.mu.Unlock()
		return c.err
	}
	if c.quiet == nil {
		c.quiet = make(chan struct{})
	}
	quiet := c.quiet
	c.mu.Unlock()
	select {
	case <-quiet:
		c.mu.Lock()
		defer c.mu.Unlock()
		return c.err
	case <-ctx.Done():
		return fmt.Errorf("write record: %w", ctx.Err())
	}
}

func (c *Disk) end(ctx context.Context) error {
	close(c.wake)
	select {
	case <-c.done:
		return c.f.Close()
	case <-ctx.Done():
		// The goroutine hangs in the disk and keeps the file; closing it under
		// its hands would only make two that hang.
		return fmt.Errorf("write record: %w", ctx.Err())
	}
}

// Simulated is the committer of runs in virtual time. It writes to the file
// buffered, and posts the durable event of all lines appended so far after a
// latency that it is given; the next one starts when the engine has taken it,
// so at most one is on its way. The same run gives the same record whatever
// the disk of the machine does. The file is synced before it is closed, not
// before: a simulated run that is killed loses lines it called durable.
type Simulated struct {
	inbox   Poster
	latency func() time.Duration
	f       file
	buffer  *bufio.Writer
	last    int64 // number of the last line put
	onWay   int64 // the line whose durable event is on its way, or 0
	err     error
}

// NewSimulated returns a committer that posts to inbox; latency gives the time
// each sync takes, for example from the run's seed.
func NewSimulated(inbox Poster, latency func() time.Duration) *Simulated {
	return &Simulated{inbox: inbox, latency: latency}
}

func (c *Simulated) begin(f file) error {
	if c.f != nil {
		return errCommitterUsed
	}
	c.f = f
	c.buffer = bufio.NewWriterSize(f, 1<<16)
	return nil
}

func (c *Simulated) put(number int64, text []byte) error {
	if c.err != nil {
		return c.err
	}
	if _, err := c.buffer.Write(text); err != nil {
		c.err = fmt.Errorf("write record: %w", err)
		c.inbox.Post(0, line.Event{Kind: line.KindDurable, Err: c.err})
		return c.err
	}
	c.last = number
	if c.onWay == 0 {
		c.start()
	}
	return nil
}

func (c *Simulated) start() {
	c.onWay = c.last
	c.inbox.Post(c.latency(), line.Event{Kind: line.KindDurable, Number: c.onWay})
}

func (c *Simulated) taken(number int64) {
	if c.onWay == 0 || number < c.onWay || c.err != nil {
		return
	}
	c.onWay = 0
	if c.last > number {
		c.start()
	}
}

func (c *Simulated) settle(context.Context) error {
	if c.err != nil {
		return c.err
	}
	err := c.buffer.Flush()
	if err == nil {
		err = c.f.Sync()
	}
	if err != nil {
		c.err = fmt.Errorf("write record: %w", err)
	}
	return c.err
}

func (c *Simulated) end(context.Context) error { return c.f.Close() }
