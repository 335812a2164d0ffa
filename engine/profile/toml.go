package profile

import (
	"bytes"
	"encoding/json"
	"fmt"
	"reflect"
	"strconv"
	"strings"
)

// TOML writes the profile as a file one can start from: every field with what it means and what it can be. Parse
// reads it back to the same profile. The name is left out, since it is the file's.
func (p Profile) TOML() []byte {
	var b bytes.Buffer
	fmt.Fprintf(&b, "# Save as NAME.toml in the profiles folder: the file's name is the profile's.\n")
	if _, err := Named(p.Name); err == nil {
		fmt.Fprintf(&b, "# Take out the lines you do not mean to change: what is left out is as in %s.\n%s = %q\n", p.Name, basis, p.Name)
	}
	table := ""
	for _, f := range fields {
		if f.Name == "name" {
			continue
		}
		if f.table() != table {
			table = f.table()
			for _, t := range tables {
				if t.Word == table {
					fmt.Fprintf(&b, "\n# %s\n[%s]\n", t.Means, table)
				}
			}
		}
		fmt.Fprintf(&b, "\n# %s\n", f.Means)
		for _, w := range f.Words {
			fmt.Fprintf(&b, "#   %s: %s\n", w.Word, w.Means)
		}
		if f.Words == nil {
			fmt.Fprintf(&b, "#   %s\n", f.Allowed())
		}
		fmt.Fprintf(&b, "%s = %s\n", strings.TrimPrefix(f.Name, table+"."), literal(f.in(&p)))
	}
	return b.Bytes()
}

// literal writes a value as TOML. Its basic strings take all that JSON's encoder writes.
func literal(v reflect.Value) string {
	switch v.Kind() {
	case reflect.Float64:
		return strconv.FormatFloat(v.Float(), 'f', -1, 64)
	case reflect.Int:
		return strconv.FormatInt(v.Int(), 10)
	}
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	if err := e.Encode(v.String()); err != nil {
		panic(err) // a string always encodes
	}
	return strings.TrimSpace(b.String())
}
