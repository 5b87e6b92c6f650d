package tomlfile

import (
	"fmt"
	"math"
	"reflect"
	"strconv"
	"strings"
)

// checkAgainst walks the file beside the struct it is meant for and refuses
// unknown keys and values of another kind. The decoder would too, but in the
// words of the program's source.
func (d *Document) checkAgainst(into any) error {
	t := reflect.TypeOf(into)
	if t == nil || t.Kind() != reflect.Pointer || t.Elem().Kind() != reflect.Struct {
		panic("tomlfile: into is not a pointer to a struct")
	}
	return d.checkNode(d.root, t.Elem(), nil)
}

func (d *Document) checkNode(n *node, t reflect.Type, path []any) error {
	switch t.Kind() {
	case reflect.Pointer:
		return d.checkNode(n, t.Elem(), path)
	case reflect.Struct:
		if n.kind != kindTable {
			return d.wrongKind(n, "a table", path)
		}
		return d.checkTable(n, t, path)
	case reflect.Slice:
		if n.kind != kindList {
			return d.wrongKind(n, listOf(t.Elem()), path)
		}
		for i, item := range n.items {
			if err := d.checkNode(item, t.Elem(), append(path[:len(path):len(path)], i)); err != nil {
				return err
			}
		}
		return nil
	case reflect.String:
		if n.kind != kindText {
			return d.wrongKind(n, "text in quotes", path)
		}
	case reflect.Bool:
		if n.kind != kindTruth {
			return d.wrongKind(n, string(kindTruth), path)
		}
	case reflect.Int, reflect.Int64:
		return d.checkWhole(n, t, path)
	case reflect.Float64:
		return d.checkNumber(n, path)
	default:
		panic("tomlfile: a field of type " + t.String())
	}
	return nil
}

func (d *Document) checkTable(n *node, t reflect.Type, path []any) error {
	fields := make(map[string]reflect.Type, t.NumField())
	known := fieldsOf(t, fields, nil)
	for _, key := range n.keys {
		field, ok := fields[key]
		if !ok {
			return d.unknown(n.table[key], key, known, path)
		}
		if err := d.checkNode(n.table[key], field, append(path[:len(path):len(path)], key)); err != nil {
			return err
		}
	}
	return nil
}

// fieldsOf collects the fields of a struct by their tags, those of embedded
// structs among them as if they were its own.
func fieldsOf(t reflect.Type, fields map[string]reflect.Type, known []string) []string {
	for i := range t.NumField() {
		f := t.Field(i)
		if f.Anonymous && f.Type.Kind() == reflect.Struct {
			known = fieldsOf(f.Type, fields, known)
			continue
		}
		tag, _, _ := strings.Cut(f.Tag.Get("toml"), ",")
		if tag == "" {
			panic("tomlfile: field " + f.Name + " has no toml tag")
		}
		known = append(known, tag)
		fields[tag] = f.Type
	}
	return known
}

func (d *Document) unknown(n *node, key string, known []string, path []any) *Error {
	what, where := "key", ""
	if n.kind == kindTable || n.kind == kindList && len(n.items) > 0 && n.items[0].kind == kindTable {
		what = "table"
	}
	if name := pathName(path); name != "" {
		where = " in " + name
	}
	return d.errorAt(n.key, fmt.Sprintf("unknown %s %q%s", what, short(key), where), DidYouMean(key, known))
}

func (d *Document) checkWhole(n *node, t reflect.Type, path []any) error {
	if n.kind != kindWhole {
		return d.wrongKind(n, string(kindWhole), path)
	}
	v, err := strconv.ParseInt(strings.ReplaceAll(n.text, "_", ""), 0, 64)
	if err != nil || reflect.Zero(t).OverflowInt(v) {
		return d.errorAt(n.value, fmt.Sprintf("key %q is too large a number", lastKey(path)), "")
	}
	return nil
}

func (d *Document) checkNumber(n *node, path []any) error {
	if n.kind != kindNumber && n.kind != kindWhole {
		return d.wrongKind(n, string(kindNumber), path)
	}
	v, err := strconv.ParseFloat(strings.ReplaceAll(n.text, "_", ""), 64)
	if n.kind == kindNumber && (err != nil || math.IsNaN(v) || math.IsInf(v, 0)) {
		return d.errorAt(n.value, fmt.Sprintf("key %q is not a finite number", lastKey(path)), "")
	}
	return nil
}

func (d *Document) wrongKind(n *node, want string, path []any) *Error {
	name := fmt.Sprintf("key %q", lastKey(path))
	if i, ok := path[len(path)-1].(int); ok {
		name += fmt.Sprintf(", item %d,", i+1)
	}
	hint := ""
	switch key := lastKey(path); {
	case want == "text in quotes" && n.kind == kindMoment:
		hint = fmt.Sprintf("write the date in quotes: %s = \"2026-03-02\"", key)
	case want == "text in quotes" && (n.kind == kindWhole || n.kind == kindNumber):
		hint = fmt.Sprintf("write it in quotes, with its unit if it has one: \"%s mmHg\"", n.text)
	case n.kind == kindText && want != "a table" && !strings.HasPrefix(want, "a list"):
		hint = "write it without quotes"
	case n.kind == kindTable && want == listOf(reflect.TypeFor[struct{}]()):
		hint = fmt.Sprintf("write [[%s]] instead of [%s]", key, key)
	case n.kind == kindList && want == "a table":
		hint = fmt.Sprintf("write [%s] instead of [[%s]]", key, key)
	}
	return d.errorAt(n.value, fmt.Sprintf("%s takes %s, not %s", name, want, n.kind), hint)
}

// listOf says what a list is made of.
func listOf(item reflect.Type) string {
	switch item.Kind() {
	case reflect.Struct:
		return "a list of tables"
	case reflect.String:
		return "a list of texts"
	}
	return "a list"
}
