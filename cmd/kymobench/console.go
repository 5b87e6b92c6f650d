package main

import (
	"bufio"
	"fmt"
	"io"
	"time"

	"kymobench/bench/line"
)

// script answers every prompt by itself; it stands in for the person in a
// demonstration.
type script struct {
	inbox line.Inbox
	err   io.Writer
	after time.Duration // virtual; 0 on real ports
}

func (s script) Tell(text string) { fmt.Fprintln(s.err, text) }

func (s script) Prompt(text string) {
	fmt.Fprintln(s.err, "? "+text+": [the demonstration answers] yes")
	s.inbox.Post(s.after, line.Event{Kind: line.KindAnswer, Text: "yes"})
}

// console is a person at a terminal or behind a pipe. It reads one line for
// each prompt and no more, so that an input without end (yes | ...) cannot
// crowd the inbox.
type console struct {
	err  io.Writer
	want chan struct{} // one for each prompt
}

// newConsole starts listening. The goroutine blocks in reading, so it is left
// behind at the end of the process.
func newConsole(in io.Reader, err io.Writer, inbox line.Inbox) console {
	c := console{err: err, want: make(chan struct{}, 16)}
	go c.listen(in, inbox)
	return c
}

func (c console) Tell(text string) { fmt.Fprintln(c.err, text) }

func (c console) Prompt(text string) {
	fmt.Fprintln(c.err, "? "+text+":")
	select {
	case c.want <- struct{}{}:
	default: // sixteen prompts wait already; the run will have given up on them
	}
}

// listen posts one line of the input, or its end, for each prompt.
func (c console) listen(in io.Reader, inbox line.Inbox) {
	lines := bufio.NewScanner(in)
	for range c.want {
		e := line.Event{Kind: line.KindAnswerEnd}
		if lines.Scan() {
			e = line.Event{Kind: line.KindAnswer, Text: printable(lines.Text())}
		}
		inbox.Post(0, e)
	}
}

// printable keeps what a record and a terminal can show of a typed line, at
// most 200 characters of it; other characters become question marks.
func printable(s string) string {
	var out []rune
	for _, r := range s {
		if r < ' ' || r == 0x7f || r == '\ufffd' || r >= 0x80 && r < 0xa0 {
			r = '?'
		}
		out = append(out, r)
		if len(out) == 200 {
			break
		}
	}
	return string(out)
}
