package main

import (
	"os"
	"testing"

	"kymobench/bench/simulated"
	"kymobench/procedures/record"
)

// The whole job ends in the true verdict whatever family each instrument is of:
// every form once, good and bad UUTs in turn; with KYMOBENCH_FULL=1 each form of
// each role with each of the next, good and bad.
func TestFamilies(t *testing.T) {
	forms := []string{
		"reference=lines,uut=checked,source=lines,valve=lines",
		"reference=modbus,uut=frames,source=modbus,valve=modbus",
		"reference=running,uut=frames,valve=modem-line",
		"reference=frames,source=lines",
	}
	full := os.Getenv("KYMOBENCH_FULL") == "1"
	if full {
		forms = nil
		form := func(role string, i int) string { f := simulated.Forms(role); return role + "=" + f[i%len(f)] }
		for i := range 15 {
			forms = append(forms, form("reference", i)+","+form("uut", i/2)+","+form("source", i/3)+","+form("valve", i/4))
		}
	}
	for i, f := range forms {
		for k, condition := range []string{simulated.Good, simulated.WrongSensitivity} {
			if !full && i%2 != k {
				continue
			}
			t.Run(f+" "+condition, func(t *testing.T) {
				j, _ := simulatedJobAs(t, t.TempDir(), f, uint64(i+1), condition)
				out, err := j.carryOne(t.Context())
				if err != nil {
					t.Fatal(err)
				}
				want := []string{"accepted", "rejected"}[k]
				if got := out.Results.Verdict.String(); got != want {
					t.Errorf("%s, not %s: %v", got, want, out.Results.Reasons)
				}
				read, err := record.ReadClosed(out.record)
				if err != nil {
					t.Fatal(err)
				}
				if t.Logf("%d bytes", read.Head.Bytes); read.Head.Bytes > 2_000_000 {
					t.Errorf("the record has %d bytes", read.Head.Bytes)
				}
			})
		}
	}
}
