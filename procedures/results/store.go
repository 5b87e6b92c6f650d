package results

import (
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strings"

	"kymobench/procedures/record"
)

// Store encodes Results for the line of the record that keeps them.
func Store(r Results, layout int) (record.StoredResults, error) {
	data, err := json.Marshal(r)
	if err != nil {
		return record.StoredResults{}, fmt.Errorf("store the results: %w", err)
	}
	return record.StoredResults{Version: Version, Layout: layout, JSON: data}, nil
}

// Stored finds the Results that a closed record keeps.
func Stored(events []record.Event) (Results, record.StoredResults, error) {
	for _, e := range slices.Backward(events) {
		if e.Kind != record.KindResults {
			continue
		}
		stored, err := record.Decode[record.StoredResults](e)
		if err != nil {
			return Results{}, stored, err
		}
		var r Results
		if err := json.Unmarshal(stored.JSON, &r); err != nil {
			return Results{}, stored, fmt.Errorf("results in line %d: %w", e.Line, err)
		}
		return r, stored, nil
	}
	return Results{}, record.StoredResults{}, fmt.Errorf("the record holds no results")
}

// What two computations of the same record may differ by, since processors and
// compilers differ in the last bits: relative, and absolute near zero. Curves
// are rounded to 1e-4, where the last bit can move a whole digit.
const (
	relativeFloor = 1e-9
	absoluteFloor = 1e-12
	curveFloor    = 2.01e-4
)

// Compare holds the Results stored in a record against those computed anew:
// words and counts equal, figures within 1e-9 relative or 1e-12, the points of
// step traces within 2e-4. It returns the place of the first difference, "" if
// there is none.
func Compare(stored, computed Results) (string, error) {
	var a, b any
	for _, x := range []struct {
		from Results
		into *any
	}{{stored, &a}, {computed, &b}} {
		data, err := json.Marshal(x.from)
		if err != nil {
			return "", err
		}
		if err := json.Unmarshal(data, x.into); err != nil {
			return "", err
		}
	}
	return differ("results", a, b), nil
}

func differ(at string, a, b any) string {
	switch a := a.(type) {
	case map[string]any:
		other, ok := b.(map[string]any)
		if !ok || len(a) != len(other) {
			return at
		}
		keys := make([]string, 0, len(a))
		for k := range a {
			keys = append(keys, k)
		}
		slices.Sort(keys)
		for _, k := range keys {
			if d := differ(at+"."+k, a[k], other[k]); d != "" {
				return d
			}
		}
		return ""
	case []any:
		other, ok := b.([]any)
		if !ok || len(a) != len(other) {
			return at
		}
		for i := range a {
			if d := differ(fmt.Sprintf("%s[%d]", at, i), a[i], other[i]); d != "" {
				return d
			}
		}
		return ""
	case float64:
		other, ok := b.(float64)
		floor := math.Max(absoluteFloor, relativeFloor*math.Abs(a))
		if strings.Contains(at, ".measured[") || strings.Contains(at, ".fitted[") {
			floor = curveFloor
		}
		if !ok || !(math.Abs(a-other) <= floor) {
			return at
		}
		return ""
	case string:
		// Texts for people quote figures; codes and outcomes are compared where
		// they stand alone.
		if _, ok := b.(string); ok && (strings.HasSuffix(at, ".text") || strings.HasSuffix(at, ".reason") || strings.HasSuffix(at, ".note")) {
			return ""
		}
		if a != b {
			return at
		}
		return ""
	}
	if a != b {
		return at
	}
	return ""
}
