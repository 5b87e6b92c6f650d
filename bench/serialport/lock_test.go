package serialport

import (
	"errors"
	"testing"
)

// One has it, the next is refused, and after the release it is free; other
// names are others' matter.
func TestLock(t *testing.T) {
	dir := t.TempDir()
	one, err := newLock(dir, "Maker,model,1,1")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := newLock(dir, "Maker,model,1,1"); !errors.Is(err, ErrLocked) {
		t.Errorf("taken twice: %v", err)
	}
	other, err := newLock(dir, "Maker,model,2,1")
	if err != nil {
		t.Errorf("another instrument: %v", err)
	} else if err := other.Release(); err != nil {
		t.Error(err)
	}
	if err := one.Release(); err != nil {
		t.Fatal(err)
	}
	again, err := newLock(dir, "Maker,model,1,1")
	if err != nil {
		t.Fatalf("after its release: %v", err)
	}
	if err := again.Release(); err != nil {
		t.Error(err)
	}
}
