package main

import (
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"kymobench": main})
}

// The sessions in testdata/script are what a user types and sees.
func TestScript(t *testing.T) {
	testscript.Run(t, testscript.Params{Dir: "testdata/script"})
}
