package tomlfile

import (
	"fmt"
	"slices"
	"unicode/utf8"
)

// longestValue is the most characters of any text that is taken, so that a
// refusal may quote it.
const longestValue = 400

// Take parses the text at the path. A key that is missing and a text that parse
// refuses become an *Error with its place, in *first, unless an earlier one
// stands there already; then nothing is parsed and the zero T returned. So a
// caller takes many values in a row and looks at *first once.
func Take[T any](d *Document, first *error, parse func(string) (T, error), path ...any) T {
	var none T
	if *first != nil {
		return none
	}
	n, whole := d.find(path)
	if !whole || n.kind != kindText {
		*first = d.Missing("", path...)
		return none
	}
	if count := utf8.RuneCountInString(n.text); count > longestValue {
		*first = d.Refuse(fmt.Sprintf("key %q has %d characters, more than %d", lastKey(path), count, longestValue), "", path...)
		return none
	}
	v, err := parse(n.text)
	if err != nil {
		*first = d.Refuse(err.Error(), "", path...)
		return none
	}
	return v
}

// TakeIf is Take for a key that may be absent, which gives the zero T.
func TakeIf[T any](d *Document, first *error, parse func(string) (T, error), path ...any) T {
	if !d.Has(path...) {
		var none T
		return none
	}
	return Take(d, first, parse, path...)
}

// TakeText takes a text of at most most characters that may not be empty.
func TakeText(d *Document, first *error, most int, path ...any) string {
	if *first == nil {
		*first = d.CheckText(most, path...)
	}
	return Take(d, first, func(s string) (string, error) { return s, nil }, path...)
}

// TakeWord takes one of the known words.
func TakeWord[T ~string](d *Document, first *error, known []T, path ...any) T {
	word := Take(d, first, func(s string) (T, error) { return T(s), nil }, path...)
	if *first == nil && !slices.Contains(known, word) {
		texts := make([]string, len(known))
		for i, k := range known {
			texts[i] = string(k)
		}
		*first = d.Refuse(fmt.Sprintf("%q is no %s", short(string(word)), lastKey(path)), DidYouMean(string(word), texts), path...)
	}
	return word
}
