package reports

import (
	"fmt"
	"time"

	"kymobench/procedures/record"
)

// StatementSchema names the form of a Statement.
const StatementSchema = "kymobench/statement/1"

// Performed is the role of who carried the run out.
const Performed = "performed"

// Statement is what a person signs about a record: which record, as what, and
// what the signature means.
type Statement struct {
	Schema  string `json:"schema"`
	Run     string `json:"run"`
	Lines   int64  `json:"lines"`
	Bytes   int64  `json:"bytes"`
	Head    string `json:"head"`
	Role    string `json:"role"`
	Name    string `json:"name"`
	Meaning string `json:"meaning"`
	Time    string `json:"time"` // RFC 3339
}

// check holds the statement against the record's head and returns its time.
func (s Statement) check(head record.Head) (time.Time, error) {
	switch {
	case s.Schema != StatementSchema:
		return time.Time{}, fmt.Errorf("statement: schema %q is not %s", s.Schema, StatementSchema)
	case s.Role != Performed:
		return time.Time{}, fmt.Errorf("statement: role %q is not %q", s.Role, Performed)
	case s.Name == "":
		return time.Time{}, fmt.Errorf("statement: it names nobody")
	case s.Meaning == "":
		return time.Time{}, fmt.Errorf("statement: it does not say what the signature means")
	case s.Run != head.Run:
		return time.Time{}, fmt.Errorf("%w: the statement is about run %q, the record is of run %q", ErrNotOne, s.Run, head.Run)
	case s.Head != head.Hash || s.Lines != head.Lines || s.Bytes != head.Bytes:
		return time.Time{}, fmt.Errorf("%w: the statement is about another state of the record of run %q", ErrNotOne, s.Run)
	}
	at, err := time.Parse(time.RFC3339, s.Time)
	if err != nil {
		return time.Time{}, fmt.Errorf("statement: time %q is not RFC 3339", s.Time)
	}
	return at, nil
}
