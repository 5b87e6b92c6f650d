package line

import "bytes"

// LongestLine is how many bytes a line of text may have.
const LongestLine = 256

// Framer cuts bytes into lines ended by CR, LF or CRLF. A line longer than
// LongestLine is dropped up to its end and counted; empty lines are no frames.
type Framer struct {
	part    []byte
	over    bool  // the present line is too long already
	Dropped int64 // lines dropped for their length
}

// Take hands every whole line to frame, which may use it until it returns, and
// stops at frame's first error; what follows in data is then lost.
func (f *Framer) Take(data []byte, frame func([]byte) error) error {
	for len(data) > 0 {
		end := bytes.IndexAny(data, "\r\n")
		if end < 0 {
			f.keep(data)
			return nil
		}
		f.keep(data[:end])
		data = data[end+1:]
		whole, over := f.part, f.over
		f.part, f.over = f.part[:0], false
		switch {
		case over:
			f.Dropped++
		case len(whole) > 0:
			if err := frame(whole); err != nil {
				return err
			}
		}
	}
	return nil
}

func (f *Framer) keep(data []byte) {
	if f.over || len(f.part)+len(data) > LongestLine {
		f.over, f.part = true, f.part[:0]
		return
	}
	f.part = append(f.part, data...)
}
