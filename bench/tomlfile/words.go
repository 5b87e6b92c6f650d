package tomlfile

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// checkCharacters refuses bytes that are not UTF-8, and characters that do not
// show or that turn the direction of what follows, in comments too: what
// people read has to be what the program reads.
func (d *Document) checkCharacters() error {
	for i := 0; i < len(d.data); {
		r, size := utf8.DecodeRune(d.data[i:])
		switch {
		case r == utf8.RuneError && size == 1:
			return d.errorAt(i, "a byte that is not UTF-8", "save the file as UTF-8")
		case r == '\r' && i+1 < len(d.data) && d.data[i+1] == '\n', r == '\n', r == '\t':
		case hidden(r):
			return d.errorAt(i, fmt.Sprintf("a character that does not show (%s)", codePoint(r)), "delete it")
		}
		i += size
	}
	return nil
}

// checkText refuses the same characters where an escape has made them, and
// line ends, which no text in these files needs.
func (d *Document) checkText(n *node) error {
	for _, r := range n.text {
		if hidden(r) {
			return d.errorAt(n.value, fmt.Sprintf("text with a character that does not show (%s)", codePoint(r)), "")
		}
	}
	return nil
}

// hidden tells control (Cc) and format (Cf) characters and line and paragraph
// separators (Zl, Zp).
func hidden(r rune) bool {
	return unicode.In(r, unicode.Cc, unicode.Cf, unicode.Zl, unicode.Zp)
}

func codePoint(r rune) string { return fmt.Sprintf("U+%04X", r) }

// plain puts a message of the TOML parser into the words of this house: its
// own are nearly so, but for characters told by code and a few terms.
func plain(message string) string {
	switch {
	case strings.HasPrefix(message, "expected newline but got"):
		return "something stands after the value" + found(message)
	case strings.HasPrefix(message, "unexpected character") && strings.HasSuffix(message, "at start of value"):
		if strings.Contains(message, "U+000A") || strings.Contains(message, "U+000D") {
			return "the value is missing"
		}
		return "not a value" + found(message)
	case strings.HasPrefix(message, "expected value, not end of input"):
		return "the value is missing"
	case strings.HasPrefix(message, "invalid character at start of key"):
		return "not a key" + found(message)
	case strings.HasPrefix(message, "expected '=' after key"):
		return "an equals sign is missing after the key"
	case strings.HasPrefix(message, "unable to parse float"):
		return "a number that is too large"
	case strings.HasPrefix(message, "expected keyword"):
		return "not a value"
	case strings.Contains(message, "strings cannot have new lines"), strings.Contains(message, "string is incomplete"),
		strings.Contains(message, "unterminated"):
		return "text without its closing quote"
	case strings.HasPrefix(message, "invalid escape character"):
		return "a backslash with a meaning that text does not know" + found(message)
	}
	return message
}

// found picks the quoted character out of a parser's "U+0079 'y'".
func found(message string) string {
	if i := strings.Index(message, "U+"); i >= 0 {
		if code, err := strconv.ParseInt(strings.Fields(message[i+2:])[0], 16, 32); err == nil && unicode.IsPrint(rune(code)) {
			return ": " + strconv.QuoteRune(rune(code))
		}
	}
	return ""
}

// syntaxHint knows the slips that are likely in these files.
func (d *Document) syntaxHint(offset int, message string) string {
	start := bytes.LastIndexByte(d.data[:min(offset, len(d.data))], '\n') + 1
	line, _, _ := bytes.Cut(d.data[start:], []byte{'\n'})
	key, value, equals := strings.Cut(strings.TrimSpace(string(line)), "=")
	key, value = strings.TrimSpace(key), strings.TrimSpace(value)
	switch {
	case strings.HasPrefix(message, "invalid escape character"):
		return `write \\ for a backslash, or put the text between '`
	case !equals || value == "":
		return ""
	case value == "True" || value == "False":
		return fmt.Sprintf("write %s = %s", key, strings.ToLower(value))
	case strings.ContainsAny(value, `"'#[{`):
		return ""
	case strings.HasPrefix(message, "expected newline"), strings.HasPrefix(message, "unexpected character"),
		strings.HasPrefix(message, "expected keyword"), strings.Contains(message, "leading zeroes"):
		return fmt.Sprintf("text stands in quotes, and so does a value with its unit: %s = %q", key, value)
	}
	return ""
}

// short cuts a word that is quoted in a refusal.
func short(word string) string {
	if utf8.RuneCountInString(word) <= LongestIdentity {
		return word
	}
	return string([]rune(word)[:LongestIdentity]) + "..."
}

// nearest returns the known word that a mistyped one was probably meant to be,
// "" when none is near: at most one slip in three letters.
func nearest(word string, known []string) string {
	if utf8.RuneCountInString(word) > LongestIdentity {
		return ""
	}
	best, least := "", max(1, utf8.RuneCountInString(word)/3)+1
	for _, k := range known {
		if n := slips(strings.ToLower(word), k); n < least {
			best, least = k, n
		}
	}
	return best
}

// DidYouMean returns a hint for a word that is none of the known ones.
func DidYouMean(word string, known []string) string {
	if k := nearest(word, known); k != "" {
		return fmt.Sprintf("did you mean %q?", k)
	}
	return "it is one of: " + strings.Join(known, ", ")
}

// slips counts the letters to insert, delete, replace or swap with the next
// (Damerau-Levenshtein distance, optimal string alignment).
func slips(from, to string) int {
	a, b := []rune(from), []rune(to)
	rows := make([][]int, len(a)+1)
	for i := range rows {
		rows[i] = make([]int, len(b)+1)
		rows[i][0] = i
	}
	for j := range rows[0] {
		rows[0][j] = j
	}
	for i := 1; i <= len(a); i++ {
		for j := 1; j <= len(b); j++ {
			cost := 1
			if a[i-1] == b[j-1] {
				cost = 0
			}
			rows[i][j] = min(rows[i-1][j]+1, rows[i][j-1]+1, rows[i-1][j-1]+cost)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				rows[i][j] = min(rows[i][j], rows[i-2][j-2]+1)
			}
		}
	}
	return rows[len(a)][len(b)]
}
