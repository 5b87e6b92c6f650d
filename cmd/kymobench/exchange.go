package main

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/setup"
)

type exchangeOptions struct {
	bench, send string
	seconds     float64
}

func newExchangeCommand(io streams) *cobra.Command {
	var o exchangeOptions
	cmd := &cobra.Command{
		Use:   "exchange ROLE",
		Short: "Talk to one instrument of a bench file, raw bytes shown",
		Long: `Opens the port of one instrument (reference, uut, readout, source or valve; of
several UUTs "uut NAME"), asks who it is, reads from it for a while, and shows
every byte that goes either way, what was understood and what was refused. The
pressure source and the valve are asked who they are and told nothing.

--send sends a line of yours instead, and shows what comes back; to an
instrument that speaks no text, the bytes in hexadecimal digits.`,
		Example: `  kymobench exchange --bench bench.toml reference
  kymobench exchange --bench bench.toml reference --send "MEAS:PRES?"`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) == 0 {
				return usagef("which instrument? reference, uut, readout, source or valve")
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			return runExchange(cmd.Context(), strings.Join(args, " "), o, newSerialPorts(), io)
		},
	}
	cmd.Flags().StringVar(&o.bench, "bench", "", "bench file")
	cmd.Flags().StringVar(&o.send, "send", "", "a line to send, with the terminator of the bench file added; bytes such as \"01 03 00 00 00 02 C4 0B\" where no text is spoken")
	cmd.Flags().Float64Var(&o.seconds, "seconds", 3, "how long to listen, or to read")
	return cmd
}

// onePort opens the port of one name and shows what passes; the others stay
// shut, and what would be sent to them goes nowhere.
type onePort struct {
	setup.Opener
	name  string
	shown *shownInbox
}

func (p onePort) Inbox() line.Inbox { return p.shown }

func (p onePort) Connect(id line.PortID, name string, mode setup.PortMode) error {
	if name != p.name {
		return nil
	}
	p.shown.port = id
	return p.Opener.Connect(id, name, mode)
}

// shownInbox prints the bytes of one port.
type shownInbox struct {
	line.Inbox
	port line.PortID
	w    io.Writer
	most int // bytes of a stream still to be shown
	hex  bool
}

// show writes bytes as text in quotes, or as hexadecimal digits.
func (s *shownInbox) show(data []byte) string {
	if s.hex {
		return fmt.Sprintf("% X", data)
	}
	return strconv.QuoteToASCII(string(data))
}

func (s *shownInbox) Send(port line.PortID, data []byte) int64 {
	if port == s.port {
		fmt.Fprintf(s.w, "%10.3f > %s\n", s.Now().Seconds(), s.show(data))
	}
	return s.Inbox.Send(port, data)
}

func (s *shownInbox) Next(ctx context.Context, until line.Instant) (line.Event, error) {
	e, err := s.Inbox.Next(ctx, until)
	switch {
	case err != nil || e.Port != s.port:
	case e.Kind == line.KindBytes && s.most > 0:
		s.most -= len(e.Data)
		fmt.Fprintf(s.w, "%10.3f < %s\n", e.At.Seconds(), s.show(e.Data))
		if s.most <= 0 {
			fmt.Fprintln(s.w, "             more of the like comes and is not shown")
		}
	case e.Kind == line.KindGone, e.Kind == line.KindWritten && e.Err != nil:
		fmt.Fprintf(s.w, "%10.3f ! %v\n", e.At.Seconds(), e.Err)
	}
	return e, err
}

// shownBytes is how much of a stream is printed: some screens.
const shownBytes = 2000

// portOf finds the port of a role in a bench file, how it is spoken with, and
// which UUT it is.
func portOf(f *setup.File, role string) (d setup.Dialogue, uut int, err error) {
	places := f.Places()
	kind, name, _ := strings.Cut(role, " ")
	switch kind {
	case "reference":
		return f.Reference.Dialogue, -1, nil
	case "source":
		return f.Pressure.Dialogue, -1, nil
	case "valve":
		return f.Valve.Dialogue, -1, nil
	case "uut", "readout":
		for i, p := range places {
			if p.Name != name && !(name == "" && i == 0) {
				continue
			}
			if kind == "uut" {
				return p.UUT.Dialogue, i, nil
			}
			if p.Readout == nil || p.Readout.Port == "" {
				return d, 0, usagef("the readout has no port of its own in %s", f.Name)
			}
			return p.Readout.Dialogue, i, nil
		}
		return d, 0, usagef("%s has no UUT %q", f.Name, name)
	}
	return d, 0, usagef("no instrument %q: there are reference, uut, readout, source and valve", role)
}

func runExchange(ctx context.Context, role string, o exchangeOptions, ports setup.Opener, io streams) error {
	if o.bench == "" {
		return usagef("--bench is needed")
	}
	if !(o.seconds > 0 && o.seconds <= 3600) {
		return usagef("--seconds is above 0 and at most 3600")
	}
	text, err := os.ReadFile(o.bench)
	if err != nil {
		return err
	}
	file, err := setup.Load(o.bench, text)
	if err != nil {
		return err
	}
	d, uut, err := portOf(file, role)
	if err != nil {
		return err
	}
	send, err := bytesToSend(o.send, d)
	if err != nil {
		return err
	}
	one := onePort{ports, d.Port, &shownInbox{Inbox: ports.Inbox(), w: io.out, most: shownBytes, hex: !d.Text()}}
	rig, err := file.Open(one)
	if err != nil {
		return err
	}
	defer rig.Close()
	until := rig.Inbox.Now().Add(time.Duration(o.seconds * float64(time.Second)))
	if o.send != "" {
		rig.Inbox.Send(one.shown.port, send)
		return listen(ctx, rig, until)
	}
	kind, _, _ := strings.Cut(role, " ")
	x := exchange{rig: rig, until: until, out: io.out}
	switch kind {
	case "reference":
		return x.read(ctx, rig.Reference)
	case "source":
		return x.identify(ctx, rig.Source)
	case "valve":
		return x.identify(ctx, rig.Valve)
	case "readout":
		return x.identify(ctx, rig.UUTs[uut].Readout)
	}
	u := rig.UUTs[uut]
	if u.Stream == nil {
		return x.read(ctx, u.Asked)
	}
	return x.watch(ctx, u.Stream)
}

// bytesToSend are what --send sends.
func bytesToSend(text string, d setup.Dialogue) ([]byte, error) {
	switch {
	case !d.Text():
		data, err := hex.DecodeString(strings.ReplaceAll(text, " ", ""))
		if err != nil {
			return nil, usagef("%s speaks no text: --send takes bytes such as \"01 03 00 00 00 02 C4 0B\", not %q", d.Family, text)
		}
		return data, nil
	case d.Terminator == "":
		return []byte(text + "\n"), nil
	}
	return []byte(text + d.Terminator), nil
}

// exchange is one conversation.
type exchange struct {
	rig                 *bench.Rig
	until               line.Instant
	out                 io.Writer
	understood, refused int
}

func listen(ctx context.Context, rig *bench.Rig, until line.Instant) error {
	err := rig.Engine.Wait(ctx, until, func() bool { return false })
	if errors.Is(err, line.ErrDeadline) || ctx.Err() != nil {
		return nil
	}
	return err
}

// identify asks who is there and says whether it is who is expected.
func (x *exchange) identify(ctx context.Context, who bench.Identified) error {
	identity, err := who.Identify(ctx)
	switch {
	case errors.Is(err, bench.ErrNotStated):
		fmt.Fprintln(x.out, "           = the bench file states no way to ask who it is")
		return nil
	case err != nil:
		fmt.Fprintf(x.out, "           x %v\n", err)
		return ended{exitInconclusive}
	}
	fmt.Fprintf(x.out, "           = it is %q, as the bench file expects\n", identity)
	return nil
}

// read asks for readings until the time is over.
func (x *exchange) read(ctx context.Context, m bench.Manometer) error {
	if err := x.identify(ctx, m); err != nil {
		return err
	}
	for x.rig.Inbox.Now() < x.until && ctx.Err() == nil {
		r, err := m.Read(ctx)
		if err != nil {
			x.refused++
			fmt.Fprintf(x.out, "           x %v\n", err)
			if errors.Is(err, line.ErrGone) || x.refused >= 3 {
				break
			}
			continue
		}
		x.understood++
		fmt.Fprintf(x.out, "           = %s\n", inWordsOf(r))
	}
	return x.sum()
}

// watch listens to a stream.
func (x *exchange) watch(ctx context.Context, s bench.Streaming) error {
	s.Watch(func(r *bench.Reading, err error) error {
		switch {
		case err != nil:
			x.refused++
			if x.refused <= 10 {
				fmt.Fprintf(x.out, "           x %s: %v\n", strconv.QuoteToASCII(r.Received()), err)
			}
		default:
			x.understood++
			if x.understood <= 10 {
				fmt.Fprintf(x.out, "           = %s\n", inWordsOf(*r))
			}
		}
		return nil
	})
	if err := listen(ctx, x.rig, x.until); err != nil {
		fmt.Fprintf(x.out, "           x %v\n", err)
	}
	return x.sum()
}

func inWordsOf(r bench.Reading) string {
	return fmt.Sprintf("%s is %.6g %s", strconv.QuoteToASCII(r.Received()), r.Value.Stated, r.Value.Unit.Name)
}

// sum counts what was understood and what was not.
func (x *exchange) sum() error {
	fmt.Fprintf(x.out, "%d readings understood, %d refused\n", x.understood, x.refused)
	if x.understood == 0 || x.refused > 0 {
		return ended{exitInconclusive}
	}
	return nil
}
