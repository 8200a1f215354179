package rig

import (
	"errors"
	"sort"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"
)

// lineMap knows on which line each key of a TOML text stands. Keys are joined
// as "bob/0/diameter_mm"; a table's own line is that of its header.
type lineMap map[string]int

// at returns the line of the key, or that of the nearest table around it.
func (m lineMap) at(key string) int {
	for {
		if n, ok := m[key]; ok {
			return n
		}
		i := strings.LastIndexByte(key, '/')
		if i < 0 {
			return 0
		}
		key = key[:i]
	}
}

// readTOML reads a TOML text as plain Go values and finds the lines of its keys.
// The error is a Problem with a line.
func readTOML(file string, data []byte) (map[string]any, lineMap, error) {
	tree := map[string]any{}
	if err := toml.Unmarshal(data, &tree); err != nil {
		p := Problem{File: file, Text: "this is not valid TOML: " + strings.TrimPrefix(err.Error(), "toml: ")}
		var at *toml.DecodeError
		if errors.As(err, &at) {
			p.Line, _ = at.Position()
		}
		return nil, nil, Problems{p}
	}
	return tree, findLines(data), nil
}

// findLines walks the syntax tree of a text that is known to be valid.
func findLines(data []byte) lineMap {
	var starts []int
	for i, b := range data {
		if b == '\n' {
			starts = append(starts, i)
		}
	}
	lines := lineMap{}
	lineOf := func(n *unstable.Node) int {
		return 1 + sort.SearchInts(starts, int(n.Raw.Offset))
	}
	note := func(key string, line int) {
		if _, seen := lines[key]; !seen {
			lines[key] = line
		}
	}
	count := map[string]int{} // elements so far of each array of tables
	// place turns the words of a header or dotted key into a key of the map:
	// a name that is an array of tables means its last element.
	place := func(prefix string, it unstable.Iterator, array bool) (string, int) {
		line := 0
		for it.Next() {
			n := it.Node()
			if line == 0 {
				line = lineOf(n)
			}
			prefix = join(prefix, string(n.Data))
			if array && it.IsLast() {
				count[prefix]++
				note(prefix, line)
			}
			if k := count[prefix]; k > 0 {
				prefix = join(prefix, strconv.Itoa(k-1))
			}
			note(prefix, line)
		}
		return prefix, line
	}
	var value func(key string, n *unstable.Node, line int)
	value = func(key string, n *unstable.Node, line int) {
		switch n.Kind {
		case unstable.InlineTable:
			for it := n.Children(); it.Next(); {
				kv := it.Node()
				if kv.Kind == unstable.KeyValue {
					k, l := place(key, kv.Key(), false)
					value(k, kv.Value(), l)
				}
			}
		case unstable.Array:
			i := 0
			for it := n.Children(); it.Next(); i++ {
				k := join(key, strconv.Itoa(i))
				note(k, line)
				value(k, it.Node(), line)
			}
		}
	}
	var p unstable.Parser
	p.Reset(data)
	table := ""
	for p.NextExpression() {
		switch e := p.Expression(); e.Kind {
		case unstable.Table:
			table, _ = place("", e.Key(), false)
		case unstable.ArrayTable:
			table, _ = place("", e.Key(), true)
		case unstable.KeyValue:
			k, line := place(table, e.Key(), false)
			value(k, e.Value(), line)
		}
	}
	return lines
}

func join(prefix, key string) string {
	if prefix == "" {
		return key
	}
	return prefix + "/" + key
}
