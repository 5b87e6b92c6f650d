package transcript

import (
	"bytes"
	"context"
	"errors"
	"strings"
	"testing"
	"time"

	"kymobench/bench/line"
)

// talk is a run in small: it looks at the time, sends, and takes every event
// until nothing comes by a deadline.
func talk(i line.Inbox) (said []string) {
	until := i.Now().Add(time.Second)
	said = append(said, i.Wall().UTC().String())
	i.Send(3, []byte("ASK?\n\x00\xff\u202e"))
	for {
		e, err := i.Next(context.Background(), until)
		if err != nil {
			return append(said, err.Error())
		}
		said = append(said, e.At.String(), string(rune('0'+e.Kind)), string(e.Data), e.Text)
		if e.Err != nil {
			said = append(said, e.Err.Error())
			if e.Kind == line.KindGone && !errors.Is(e.Err, line.ErrGone) {
				said = append(said, "not gone")
			}
		}
	}
}

// events are one of each kind, with bytes that are no text.
func events() []line.Event {
	return []line.Event{
		{Kind: line.KindBytes, Port: 3, Data: []byte("+1.5\r\n\x00\xfe\"")}, {Kind: line.KindGone, Port: 3, Err: line.ErrGone},
		{Kind: line.KindDurable, Port: 1, Number: 7}, {Kind: line.KindDurable, Port: 1, Err: errors.New("write record: no space")},
		{Kind: line.KindAnswer, Text: "yes \u00e4"}, {Kind: line.KindAnswerEnd}, {Kind: line.KindStop},
		{Kind: line.KindOverflow, Port: 2, Err: errors.New("16384 events waited")},
	}
}

// What was kept is given again: every kind of event, errors, odd bytes, the
// deadline and the times; a run that does something else is told where.
func TestKeepAndPlay(t *testing.T) {
	inbox := line.NewMemory(time.Date(2026, 6, 1, 8, 0, 0, 123456789, time.UTC))
	for k, e := range events() {
		inbox.Post(time.Duration(k+1)*time.Millisecond, e)
	}
	var text bytes.Buffer
	keeper := Keep(inbox, &text)
	want := talk(keeper)
	if err := keeper.Close(); err != nil {
		t.Fatal(err)
	}
	player, err := Read(bytes.NewReader(text.Bytes()))
	if err != nil {
		t.Fatal(err)
	}
	got := talk(player)
	if strings.Join(got, "|") != strings.Join(want, "|") || player.Err() != nil || player.Rest() != 0 {
		t.Errorf("%q\nwant %q\n%v, %d left", got, want, player.Err(), player.Rest())
	}
	if len(want) < 4*len(events()) {
		t.Errorf("only %q was said", want)
	}

	for from, to := range map[string]string{`ASK?`: `BSK?`, "\nt ": "\nt 1"} { // other bytes, another deadline
		changed := strings.Replace(text.String(), from, to, 1)
		player, err := Read(strings.NewReader(changed))
		if err != nil {
			t.Fatal(err)
		}
		talk(player)
		if !errors.Is(player.Err(), ErrDiverges) {
			t.Errorf("%q for %q: %v", to, from, player.Err())
		}
	}
	cut := text.String()[:strings.Index(text.String(), "\nt ")+1]
	if player, err = Read(strings.NewReader(cut)); err != nil {
		t.Fatal(err)
	}
	talk(player)
	if !errors.Is(player.Err(), ErrEnd) {
		t.Errorf("a transcript that was cut: %v", player.Err())
	}
}

// What is no transcript is refused with its line.
func TestRefusals(t *testing.T) {
	for _, bad := range []string{
		"", "kymobench-transcript/2\n", Schema + "\nq 1\n", Schema + "\nn\n", Schema + "\nn x\n", Schema + "\n< 1 2\n", Schema + "\n< 1 2 \"open\n",
		Schema + "\nt 1 \"text\"\n", Schema + "\n\n", Schema + "\nn 99999999999999999999\n", Schema + "\na 1 raw\n",
	} {
		if p, err := Read(strings.NewReader(bad)); !errors.Is(err, ErrForm) || p != nil {
			t.Errorf("%q: %v, %v", bad, p, err)
		}
	}
}

// A line that is taken is written again as it was.
func FuzzParse(f *testing.F) {
	for _, seed := range []string{`> 1 2 "x"`, `w 1 2 3`, `w 1 2 3 "error"`, `< 1 2 "\x00"`, `n 5`, `c "2026-06-01T08:00:00Z"`, `m 1 ""`, `t -1`} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, text string) {
		e, err := parse(text)
		if err != nil {
			return
		}
		k := (&Keeper{}).begin(e.letter)
		for _, n := range e.numbers {
			k.number(n)
		}
		if e.has {
			k.quoted(e.text)
		}
		again, err := parse(string(k.text))
		if err != nil || again.letter != e.letter || again.text != e.text || len(again.numbers) != len(e.numbers) {
			t.Errorf("%q became %q: %+v, %+v, %v", text, k.text, e, again, err)
		}
	})
}
