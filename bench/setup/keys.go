package setup

import (
	"fmt"
	"slices"
	"strings"

	"kymobench/bench/tomlfile"
)

// wireKeys are the keys of an instrument's port and of how it is asked.
type wireKeys struct {
	Family       string `toml:"family"`
	Mode         string `toml:"mode"`
	Port         string `toml:"port"`
	Baud         int    `toml:"baud"`
	DataBits     int    `toml:"data_bits"`
	Parity       string `toml:"parity"`
	StopBits     int    `toml:"stop_bits"`
	Terminator   string `toml:"terminator"`
	Echo         bool   `toml:"echo"`
	AnswerWithin string `toml:"answer_within"`
	Identify     string `toml:"identify"`
	Identity     string `toml:"identity"`
	Uptime       string `toml:"uptime"`
	Clear        string `toml:"clear"`
	Errors       string `toml:"errors"`
	Acknowledged string `toml:"acknowledged"`
	Station      int    `toml:"station"`
	ByteOrder    string `toml:"byte_order"`
	WordOrder    string `toml:"word_order"`
}

// numberKeys say where a number stands in what an instrument sends, and what
// stands around it.
type numberKeys struct {
	Read string `toml:"read"`
	Unit string `toml:"unit"`

	// in a line of text
	Separator      string   `toml:"separator"`
	Column         int      `toml:"column"`
	Columns        int      `toml:"columns"`
	NumberAt       int      `toml:"number_at"`
	Prefix         string   `toml:"prefix"`
	Suffix         string   `toml:"suffix"`
	Width          int      `toml:"width"`
	Length         int      `toml:"length"` // also of a frame, in bytes
	Decimal        string   `toml:"decimal"`
	UnitInText     bool     `toml:"unit_in_text"`
	UnitText       string   `toml:"unit_text"`
	UnitColumn     int      `toml:"unit_column"`
	UnitAt         int      `toml:"unit_at"`
	StatusColumn   int      `toml:"status_column"`
	StatusAt       int      `toml:"status_at"`
	StatusWidth    int      `toml:"status_width"`
	StatusFine     []string `toml:"status_fine"`
	StatusOver     []string `toml:"status_over"`
	OverRange      []string `toml:"over_range"`
	Begins         string   `toml:"begins"`
	Checksum       string   `toml:"checksum"`
	ChecksumMark   string   `toml:"checksum_mark"`
	ChecksumCovers []string `toml:"checksum_covers"`
	ChecksumLower  bool     `toml:"checksum_lower"`

	// in a frame
	Sync          string  `toml:"sync"`
	End           string  `toml:"end"`
	Number        string  `toml:"number"`
	Sequence      string  `toml:"sequence"`
	Status        string  `toml:"status"`
	ChecksumFrom  int     `toml:"checksum_from"`
	ChecksumOrder string  `toml:"checksum_order"`
	Scale         float64 `toml:"scale"` // also of a register
	Offset        float64 `toml:"offset"`
}

// The families, and what each has beside the keys of its role.
const (
	familySCPI   = "scpi"
	familyLines  = "lines"
	familyFrames = "frames"
	familyModbus = "modbus"
	familyRelay  = "modem-line"

	modeAsked   = "asked"
	modeRunning = "free-running"
)

const (
	portWords   = "family port baud data_bits parity stop_bits "
	askedWords  = "answer_within identify identity uptime "
	dialogWords = "terminator echo "
	fieldWords  = "separator column columns number_at prefix suffix width length decimal unit_in_text unit_text unit_column unit_at " +
		"status_column status_at status_width status_fine status_over over_range begins checksum checksum_mark checksum_covers checksum_lower "
)

// keysOf lists what a family has beside the keys of its role; number says that
// it is read, not only told.
func keysOf(family, mode string, number bool) string {
	switch family {
	case familySCPI:
		keys := portWords + askedWords + dialogWords + "clear errors "
		if number {
			keys += "read unit " + fieldWords
		}
		return keys
	case familyLines:
		keys := portWords + dialogWords
		if mode == modeAsked {
			keys += askedWords + "acknowledged "
		}
		if !number {
			return keys
		}
		keys += "mode unit " + fieldWords
		if mode == modeAsked {
			keys += "read "
		} else {
			keys += "answer_within "
		}
		return keys
	case familyFrames:
		return portWords + "terminator answer_within unit length sync end number sequence status status_fine over_range checksum checksum_from checksum_order scale offset "
	case familyModbus:
		keys := portWords + askedWords + "echo station byte_order word_order "
		if number {
			keys += "read unit scale offset over_range "
		}
		return keys
	case familyRelay:
		return "family port answer_within "
	}
	return ""
}

// only refuses the keys of a table that its family does not have.
func (l *loader) only(role, family, words string, path ...any) {
	known := strings.Fields(words)
	for _, key := range l.doc.Keys(path...) {
		if l.err != nil || slices.Contains(known, key) {
			continue
		}
		l.refuse(l.doc.RefuseKey(fmt.Sprintf("%s of family %s has no key %q", role, family, key), tomlfile.DidYouMean(key, known), to(path, key)...))
	}
}

// to is the path of a key in the table at path.
func to(path []any, key string) []any { return append(slices.Clone(path), key) }
