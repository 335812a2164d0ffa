package profile

import (
	"bytes"
	"strings"

	"github.com/pelletier/go-toml/v2/unstable"
)

// lines tells the line of each name in a TOML text that has been read without an error.
func lines(text []byte) map[string]int {
	at := map[string]int{}
	var p unstable.Parser
	p.Reset(text)
	line, from := 1, 0 // where the last name begins; names come in the order of the text
	note := func(name string, key unstable.Iterator) string {
		for key.Next() {
			name = strings.TrimPrefix(name+"."+string(key.Node().Data), ".")
			if to := int(key.Node().Raw.Offset); to > from {
				line, from = line+bytes.Count(text[from:to], []byte{'\n'}), to
			}
			if _, known := at[shortened(name)]; !known {
				at[shortened(name)] = line
			}
		}
		return name
	}
	var pair func(table string, n *unstable.Node)
	pair = func(table string, n *unstable.Node) {
		name := note(table, n.Key())
		if n.Value().Kind != unstable.InlineTable || table != "" {
			return // no field lies deeper
		}
		for inner := n.Value().Children(); inner.Next(); {
			pair(name, inner.Node())
		}
	}
	table := ""
	for p.NextExpression() {
		switch n := p.Expression(); n.Kind {
		case unstable.Table, unstable.ArrayTable:
			table = note("", n.Key())
		case unstable.KeyValue:
			pair(table, n)
		}
	}
	return at
}
