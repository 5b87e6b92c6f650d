package run

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/procedures"
	"kymobench/procedures/record"
)

// Warnings are shown at the start of every run and printed in every report.
// They repeat what is usual in the trade (common practice, no source); local
// codes, the makers' instructions and licensed practice come first.
func Warnings() []string {
	return []string{
		"Never connect this bench, or anything on it, to a patient. A monitor under test is off the central feed and its alarms are not relied on; restore its filter and zero afterwards.",
		"Know the decontamination status of the UUT before you handle it. After a harm incident impound it: no test that alters evidence without authority.",
		"Never exceed the rated pressure (high or vacuum) or the rated excitation of UUT and reference. A relief valve and a normally-open vent must be there in hardware: software cannot vent after a power cut.",
		"Regulated clean air and a small gas volume only, never oxygen. Liquid trap, catch-pot, splash and eye protection; glass under pressure can burst.",
		"Isolated serial lines to a mains-powered PC, unplugged for electrical safety tests, which belong to licensed practice.",
		"A single-use part that was tested is destroyed or marked not for clinical use. Drain, dry and disinfect before return.",
		"The manufacturer's instructions and local codes prevail. The report says what was measured on the bench, not that a device is fit for a given patient.",
	}
}

// answerWithin is how long a prompt may stay unanswered.
const answerWithin = 10 * time.Minute

// identify asks every instrument that can be asked who it is.
func (s *session) identify(ctx context.Context) error {
	ask := func(role string, i bench.Identified, into *record.Instrument) error {
		if i == nil {
			return nil
		}
		identity, err := i.Identify(ctx)
		if errors.Is(err, bench.ErrNotStated) {
			if !slices.Contains(s.nameless, role) {
				s.nameless = append(s.nameless, role)
			}
			return nil
		}
		if err != nil {
			return fmt.Errorf("%s: %w", role, err)
		}
		into.Identity = identity
		return nil
	}
	f := &s.Facts
	if err := ask("reference", s.Rig.Reference, &f.Reference.Instrument); err != nil {
		return err
	}
	if err := ask("pressure source", s.Rig.Source, &f.Source); err != nil {
		return err
	}
	if err := ask("valve", s.Rig.Valve, &f.Valve.Instrument); err != nil {
		return err
	}
	asked := map[bench.Identified]string{}
	for _, u := range s.units {
		who := u.rig.Readout
		if u.Readout == nil || who == nil {
			continue
		}
		identity, known := asked[who]
		if !known {
			into := record.Instrument{}
			if err := ask("readout", who, &into); err != nil {
				return err
			}
			identity = into.Identity
			asked[who] = identity
		}
		readout := *u.Readout // may be shared with another UUT
		readout.Identity = identity
		u.Readout = &readout
	}
	return nil
}

// open writes the first lines: the run, the files it goes by, the instruments.
func (s *session) open(ctx context.Context) error {
	for _, u := range s.units {
		if _, err := s.put(u, record.KindOpened, u.Opened); err != nil {
			return err
		}
	}
	if err := s.durable(ctx); err != nil {
		return err
	}
	f, d := s.Facts, s.Definition
	type first struct {
		kind    string
		payload any
	}
	for _, u := range s.units {
		lines := []first{
			{record.KindProcedure, record.File{Name: d.Name, ID: d.ID, Revision: d.Revision, Title: d.Title, SHA256: d.SHA256, Text: string(d.Source)}},
			{record.KindBenchFile, s.BenchFile},
			{record.KindReference, f.Reference},
			{record.KindUUT, u.UUT},
		}
		if u.Readout != nil {
			lines = append(lines, first{record.KindReadout, *u.Readout})
		}
		lines = append(lines, first{record.KindSource, f.Source}, first{record.KindValve, f.Valve})
		for _, o := range u.Overrides {
			lines = append(lines, first{record.KindOverride, o})
		}
		for _, l := range lines {
			if _, err := s.put(u, l.kind, l.payload); err != nil {
				return err
			}
		}
	}
	for _, u := range s.units {
		if u.rig.Applied == nil {
			continue
		}
		text := "the bench measures the applied pressure, and a run does not read it yet: the valve's stated edge was used for the steps"
		if _, err := s.put(u, record.KindReservation, record.Reservation{Code: "applied_not_read", Text: text}); err != nil {
			return err
		}
	}
	for _, role := range s.nameless {
		text := "the " + role + " cannot be asked who it is: that it is the one in the bench file is the operator's word"
		if err := s.append(record.KindReservation, record.Reservation{Code: "identity_not_asked", Text: text}); err != nil {
			return err
		}
	}
	return s.durable(ctx)
}

// warn shows the warnings and waits for the operator, first with them and then
// with the UUT connected.
func (s *session) warn(ctx context.Context) error {
	for _, w := range Warnings() {
		s.Operator.Tell("! " + w)
	}
	answer, err := s.ask(ctx, "Read the warnings above. Enter goes on, \"stop\" ends")
	if err != nil {
		return err
	}
	if err := s.append(record.KindWarnings, record.Warnings{Lines: Warnings(), Acknowledged: answer}); err != nil {
		return err
	}
	for _, u := range s.units {
		at := ""
		if u.rig.Name != "" {
			at = " at place " + u.rig.Name
		}
		_, err = s.ask(ctx, fmt.Sprintf("Connect UUT %s%s, diaphragm at the stated height, line filled and free of air. Enter goes on, \"stop\" ends", u.UUT.SerialNumber, at))
		if err != nil {
			return err
		}
	}
	return nil
}

// ask prompts the operator and waits for one line. "stop", "no", "n" and "q"
// stop the run; anything else goes on and stands in the record as typed.
func (s *session) ask(ctx context.Context, text string) (string, error) {
	if err := s.append(record.KindPrompt, record.Prompt{Text: text}); err != nil {
		return "", err
	}
	s.Operator.Prompt(text)
	err := s.Rig.Engine.Wait(ctx, s.now().Add(answerWithin), func() bool { return len(s.answers) > 0 })
	if errors.Is(err, line.ErrDeadline) {
		return "", fmt.Errorf("%w %q within %v", ErrUnanswered, text, answerWithin)
	}
	if err != nil {
		return "", err
	}
	answer := s.answers[0]
	s.answers = s.answers[1:]
	if err := s.append(record.KindAnswer, answer); err != nil {
		return "", err
	}
	if answer.End {
		return "", fmt.Errorf("%w %q", ErrInputEnded, text)
	}
	switch strings.ToLower(strings.TrimSpace(answer.Text)) {
	case "stop", "no", "n", "q", "quit":
		return "", fmt.Errorf("%w by the operator at the prompt %q", ErrStopped, text)
	}
	return answer.Text, nil
}

// warmUp holds what the instruments say of their time since power-on against
// the procedure's, and waits for the rest.
func (s *session) warmUp(ctx context.Context, stage procedures.WarmUp) error {
	shortest := time.Duration(1<<63 - 1)
	told := 0
	ask := func(role string, i bench.Identified) error {
		up, err := i.Uptime(ctx)
		if errors.Is(err, bench.ErrNotStated) {
			return nil
		}
		if err != nil {
			return s.stopOr(ctx, &Fault{Code: "uptime", Text: "the " + role + " does not say how long it has been on", Err: err}, err)
		}
		told++
		shortest = min(shortest, up)
		return nil
	}
	if err := ask("reference", s.Rig.Reference); err != nil {
		return err
	}
	seen := map[bench.Identified]bool{}
	for _, u := range s.live() {
		who := u.rig.Readout
		if who == nil || seen[who] {
			continue
		}
		seen[who] = true
		if err := ask("readout", who); err != nil {
			return err
		}
	}
	if told == 0 {
		text := "no instrument says how long it has been on; the operator vouches for the warm-up"
		return s.append(record.KindReservation, record.Reservation{Code: "warm_up_not_stated", Text: text})
	}
	wait := stage.Minimum - shortest
	if wait <= 0 {
		s.Operator.Tell(fmt.Sprintf("  warmed up: on for %v at least", shortest.Round(time.Second)))
		return nil
	}
	if wait > stage.LongestWait {
		return &Fault{Code: "warm_up", Text: fmt.Sprintf("%v of warm-up are missing, the procedure waits %v at most: come back later", wait, stage.LongestWait)}
	}
	s.Operator.Tell(fmt.Sprintf("  warming up, %v to go", wait.Round(time.Second)))
	return s.pause(ctx, s.now().Add(wait))
}
