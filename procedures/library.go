package procedures

import (
	"embed"
	"errors"
	"fmt"
	"io/fs"
	"strings"
)

// library is the procedures that come with the program; compiled in, so that
// the program is one file.
//
//go:embed library/*.toml
var library embed.FS

// ErrNotShipped is what Shipped says of a name it does not have.
var ErrNotShipped = errors.New("no procedure of that name comes with the program")

// Shipped loads the procedure of that name that comes with the program.
func Shipped(name string) (*Definition, error) {
	data, err := library.ReadFile("library/" + name + ".toml")
	if errors.Is(err, fs.ErrNotExist) || errors.Is(err, fs.ErrInvalid) {
		return nil, fmt.Errorf("%w: %q; there is %s", ErrNotShipped, name, strings.Join(ShippedNames(), ", "))
	}
	if err != nil {
		return nil, fmt.Errorf("read procedure %q: %w", name, err)
	}
	return Load(name+".toml", data)
}

// ShippedNames returns the names that Shipped takes, in alphabetical order.
func ShippedNames() []string {
	files, err := fs.Glob(library, "library/*.toml")
	if err != nil {
		panic(err) // the pattern is a constant
	}
	names := make([]string, len(files))
	for i, f := range files {
		names[i] = strings.TrimSuffix(strings.TrimPrefix(f, "library/"), ".toml")
	}
	return names
}
