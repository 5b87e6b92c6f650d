package tomlfile

import (
	"errors"
	"fmt"
	"strings"
	"testing"
)

type colour string

// The first refusal stays, and nothing is parsed after it.
func TestTake(t *testing.T) {
	length := func(s string) (int, error) {
		if s == "bad" {
			return 7, errors.New("a bad one")
		}
		return len(s), nil
	}
	type file struct {
		A string `toml:"a"`
		B string `toml:"b"`
		C string `toml:"c"`
		N int    `toml:"n"`
	}
	long := strings.Repeat("é", 401)
	for _, c := range []struct {
		text string
		take func(d *Document, first *error) any
		want string
	}{
		{`a = "four"`, func(d *Document, e *error) any { return Take(d, e, length, "a") }, "4 <nil>"},
		{`a = "bad"`, func(d *Document, e *error) any { return Take(d, e, length, "a") }, "0 x.toml:1:5: a bad one"},
		{`b = "x"`, func(d *Document, e *error) any { return Take(d, e, length, "a") }, `0 x.toml:1:1: key "a" is missing in the file`},
		{`n = 3`, func(d *Document, e *error) any { return Take(d, e, length, "n") }, `0 x.toml:1:1: key "n" is missing in the file`},
		{`a = "` + long + `"`, func(d *Document, e *error) any { return Take(d, e, length, "a") }, `0 x.toml:1:5: key "a" has 401 characters, more than 400`},
		{`b = "x"`, func(d *Document, e *error) any { return TakeIf(d, e, length, "a") }, "0 <nil>"},
		{`a = "bad"`, func(d *Document, e *error) any { return TakeIf(d, e, length, "a") }, "0 x.toml:1:5: a bad one"},
		{"a = \"bad\"\nb = \"bad\"\nc = \"four\"", func(d *Document, e *error) any {
			return []int{Take(d, e, length, "b"), Take(d, e, length, "a"), Take(d, e, length, "c")}
		}, "[0 0 0] x.toml:2:5: a bad one"},
		{`a = "four"`, func(d *Document, e *error) any { return TakeText(d, e, 4, "a") }, "four <nil>"},
		{`a = "four"`, func(d *Document, e *error) any { return TakeText(d, e, 3, "a") }, ` x.toml:1:5: key "a" has 4 characters, more than 3`},
		{`a = "red"`, func(d *Document, e *error) any { return TakeWord(d, e, []colour{"blue", "red"}, "a") }, "red <nil>"},
		{`a = "rde"`, func(d *Document, e *error) any { TakeWord(d, e, []colour{"blue", "red"}, "a"); return "" }, ` x.toml:1:5: "rde" is no a`},
		{`a = "` + long[:140] + `"`, func(d *Document, e *error) any { TakeWord(d, e, []colour{"blue"}, "a"); return "" },
			` x.toml:1:5: "` + strings.Repeat("é", 64) + `..." is no a`},
	} {
		var f file
		d, err := Read("x.toml", []byte(c.text), &f)
		if err != nil {
			t.Fatal(err)
		}
		var first error
		taken := c.take(d, &first)
		if got := fmt.Sprint(taken, " ", first); strings.Join(strings.Fields(got), " ") != strings.TrimSpace(c.want) {
			t.Errorf("%.30s: %s, want %s", c.text, got, c.want)
		}
	}
}

// A file as large as allowed with one endless word is refused without much
// work and with a message that can be printed.
func TestEndlessWords(t *testing.T) {
	endless := strings.Repeat("k", LargestFile/4)
	for _, text := range []string{endless + " = 1\n", "a." + endless + " = 1\n" + "a." + endless + " = 2\n"} {
		var f instrumentFile
		_, err := Read("x.toml", []byte(text), &f)
		if err == nil || len(err.Error()) > 300 {
			t.Errorf("%.200v", err)
		}
	}
	var first error
	var f struct {
		A string `toml:"a"`
	}
	d, err := Read("x.toml", []byte(`a = "`+endless+`"`), &f)
	if err != nil {
		t.Fatal(err)
	}
	TakeWord(d, &first, []colour{"red"}, "a")
	if first == nil || len(first.Error()) > 300 {
		t.Errorf("%.200v", first)
	}
}
