package rig

import (
	"fmt"
	"sort"
	"strings"
)

// Problem is one thing that is wrong with a rig file, at one line.
type Problem struct {
	File string
	Line int // 0 where no line is to blame
	Text string
}

// Error says file, line and what to do, in one line.
func (p Problem) Error() string {
	if p.Line == 0 {
		return p.File + ": " + p.Text
	}
	return fmt.Sprintf("%s line %d: %s", p.File, p.Line, p.Text)
}

// Problems is everything that is wrong with a rig file, in the order of lines.
type Problems []Problem

// Error gives one line per problem.
func (ps Problems) Error() string {
	lines := make([]string, len(ps))
	for i, p := range ps {
		lines[i] = p.Error()
	}
	return strings.Join(lines, "\n")
}

// reporter gathers problems.
type reporter struct {
	file string
	list Problems
}

func (r *reporter) say(line int, format string, args ...any) {
	const most = 20 // more than this help nobody
	if len(r.list) < most {
		r.list = append(r.list, Problem{r.file, line, fmt.Sprintf(format, args...)})
	}
}

func (r *reporter) err() error {
	if len(r.list) == 0 {
		return nil
	}
	sort.SliceStable(r.list, func(i, j int) bool { return r.list[i].Line < r.list[j].Line })
	return r.list
}

// nearest returns the candidate with the least edit distance from word; ok is
// false where even that one is not alike.
func nearest(word string, candidates []string) (best string, ok bool) {
	least := len([]rune(word))/2 + 2
	for _, c := range candidates {
		if d := editDistance(word, c); d < least {
			best, least, ok = c, d, true
		}
	}
	return best, ok
}

// editDistance counts insertions, deletions, substitutions and swaps of
// neighbours (optimal string alignment distance; Damerau 1964).
func editDistance(a, b string) int {
	x, y := []rune(strings.ToLower(a)), []rune(strings.ToLower(b))
	const longest = 80 // keys are short: a longer word is like none of them
	if len(x) > longest || len(y) > longest {
		return longest
	}
	var before, prev, cur [longest + 1]int
	for j := range len(y) + 1 {
		prev[j] = j
	}
	for i := 1; i <= len(x); i++ {
		cur[0] = i
		for j := 1; j <= len(y); j++ {
			cost := 1
			if x[i-1] == y[j-1] {
				cost = 0
			}
			cur[j] = min(prev[j]+1, cur[j-1]+1, prev[j-1]+cost)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				cur[j] = min(cur[j], before[j-2]+1)
			}
		}
		before, prev = prev, cur
	}
	return prev[len(y)]
}

// quoted joins words as "a", "b" or "c".
func quoted(words []string) string {
	q := make([]string, len(words))
	for i, w := range words {
		q[i] = fmt.Sprintf("%q", w)
	}
	switch len(q) {
	case 0:
		return "none"
	case 1:
		return q[0]
	}
	return strings.Join(q[:len(q)-1], ", ") + " or " + q[len(q)-1]
}
