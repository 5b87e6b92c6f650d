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

// console is a person at a terminal or behind a pipe.
type console struct{ err io.Writer }

func (c console) Tell(text string) { fmt.Fprintln(c.err, text) }

func (c console) Prompt(text string) { fmt.Fprintln(c.err, "? "+text+":") }

// listen posts the lines of the input, and its end, until the inbox is no
// longer of use. It blocks in reading, so it is left behind at the end of the
// process.
func listen(in io.Reader, inbox line.Inbox) {
	lines := bufio.NewScanner(io.LimitReader(in, 1<<20))
	for lines.Scan() {
		inbox.Post(0, line.Event{Kind: line.KindAnswer, Text: printable(lines.Text())})
	}
	inbox.Post(0, line.Event{Kind: line.KindAnswerEnd})
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
