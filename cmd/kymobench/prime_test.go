package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"io"
	"math"
	"strings"
	"testing"
	"time"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
	"kymobench/procedures"
	"kymobench/procedures/run"
)

// hands answer the prompts of a priming round: from the second on they flush
// first, and after so many releases they stop.
type hands struct {
	inbox   line.Inbox
	flush   func()
	left    int
	prompts int
}

func (h *hands) Tell(string) {}

func (h *hands) Prompt(string) {
	answer := "yes"
	if h.prompts++; h.prompts > 1 {
		h.flush()
		if h.left--; h.left == 0 {
			answer = "stop"
		}
	}
	h.inbox.Post(500*time.Millisecond, line.Event{Kind: line.KindAnswer, Text: answer})
}

// primed goes through a round on the simulated bench.
func primed(t *testing.T, ctx context.Context, seed uint64, condition string, releases int, flush bool, machines func(*simulated.Bench) map[string]line.Machine) (primeDocument, *simulated.Bench, error) {
	t.Helper()
	b, err := simulated.New(simulated.Settings{Seed: seed, Condition: condition})
	if err != nil {
		t.Fatal(err)
	}
	file, err := setup.Load("bench.toml", b.BenchFile(nil))
	if err != nil {
		t.Fatal(err)
	}
	d, err := procedures.Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	ports := replacing{memoryPorts: newMemoryPorts(b)}
	if machines != nil {
		ports.machines = machines(b)
	}
	act := b.Flush
	if !flush {
		act = func() {}
	}
	var out bytes.Buffer
	err = prime(ctx, file, d, ports, func(i line.Inbox) run.Operator { return &hands{inbox: i, flush: act, left: releases} }, true, streams{out: &out, err: io.Discard})
	var doc primeDocument
	if out.Len() > 0 {
		if e := json.Unmarshal(out.Bytes(), &doc); e != nil {
			t.Fatal(e)
		}
	}
	return doc, b, err
}

// A bubble is flushed out: it is named at once, each flush is seen, the product
// stays, and in the end the line is within the limits and told to be done.
func TestPrimingFollowsTheBubble(t *testing.T) {
	for seed := range seeds(2) {
		doc, b, err := primed(t, t.Context(), seed+1, simulated.AirBubble, 8, true, nil)
		if err != nil {
			t.Fatal(err)
		}
		if doc.Schema != "kymobench/prime/1" || len(doc.Trials) != 8 || !strings.Contains(doc.Ended, "stopped by the operator") {
			t.Fatalf("seed %d: %d trials, %q", seed+1, len(doc.Trials), doc.Ended)
		}
		truth := b.Truth()
		if f := doc.Trials[0].Frequency; math.Abs(f.Value/truth.NaturalFrequency-1) > 0.05 {
			t.Errorf("seed %d: first %.3f Hz, truth %.3f", seed+1, f.Value, truth.NaturalFrequency)
		}
		var advice []string
		for i, trial := range doc.Trials {
			advice = append(advice, trial.Advice.Code)
			// Each release scatters by 0.3 % in fn and 0.8 % in zeta.
			product := truth.NaturalFrequency * truth.DampingRatio
			if v := *trial.Product.Value; math.Abs(v/product-1) > 0.1 {
				t.Errorf("seed %d, release %d: product %.3f, truth %.3f", seed+1, i+1, v, product)
			}
		}
		told := strings.Join(advice, " ")
		if advice[0] != "flush_air" || advice[1] != "flush_air" && advice[1] != "still_rising" || advice[7] != "done" || strings.Contains(told, "narrowed") || strings.Contains(told, "entered") {
			t.Errorf("seed %d: %s", seed+1, told)
		}
	}
}

// Without a bubble nothing changes, and that is told; a line damped too much is
// told to be as good as flushing makes it.
func TestPrimingTellsTheEnd(t *testing.T) {
	for condition, want := range map[string]string{simulated.Good: "done", simulated.Overdamped: "settled"} {
		doc, _, err := primed(t, t.Context(), 3, condition, 3, true, nil)
		if err != nil {
			t.Fatal(err)
		}
		if last := doc.Trials[len(doc.Trials)-1]; last.Advice.Code != want {
			t.Errorf("%s: %+v", condition, last.Advice)
		}
	}
}

// However a round ends, the bench is vented: on the operator's word, and within
// 200 ms of virtual time when it is cancelled anywhere.
func TestPrimingVents(t *testing.T) {
	for k := range seeds(10) {
		stop := 1 + int(k*13)
		ctx, cancel := context.WithCancel(t.Context())
		var source, reference *listening
		_, _, err := primed(t, ctx, k, simulated.Good, 3, false, func(b *simulated.Bench) map[string]line.Machine {
			source = &listening{Machine: b.Machine(simulated.RoleSource), word: "SOUR:VENT"}
			reference = &listening{Machine: b.Machine(simulated.RoleReference), word: "MEAS", stop: stop, cancel: cancel}
			return map[string]line.Machine{simulated.RoleSource: source, simulated.RoleReference: reference}
		})
		cancel()
		if reference.events < stop {
			break // the round was over before: all was vented by the operator's word
		}
		vented := false
		for _, at := range source.heard {
			vented = vented || at >= reference.at && at.Sub(reference.at) <= 200*time.Millisecond
		}
		if !vented {
			t.Errorf("cancelled at message %d, %v: vents heard at %v, %v", stop, reference.at, source.heard, err)
		}
		var done ended
		if err != nil && !errors.As(err, &done) && !errors.Is(err, context.Canceled) {
			t.Errorf("cancelled at message %d: %v", stop, err)
		}
	}
	var source *listening
	if _, _, err := primed(t, t.Context(), 1, simulated.Good, 1, false, func(b *simulated.Bench) map[string]line.Machine {
		source = &listening{Machine: b.Machine(simulated.RoleSource), word: "SOUR:VENT"}
		return map[string]line.Machine{simulated.RoleSource: source}
	}); err != nil || len(source.heard) == 0 {
		t.Errorf("stopped by the operator: vents heard at %v, %v", source.heard, err)
	}
}
