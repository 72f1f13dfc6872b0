package rules

import (
	"fmt"
	"slices"
	"strings"
)

// problemsMax bounds what one file may report; nobody mends more in one go, and a hostile file costs no memory.
const problemsMax = 200

// A Problem is one thing wrong, or worth a warning, in a file that people write.
type Problem struct {
	File         string
	Line, Column int // from 1; 0 where the whole file is meant
	What         string
	Mend         string // what to write instead; may be empty
}

func (p Problem) String() string {
	var b strings.Builder
	b.WriteString(p.File)
	if p.Line > 0 {
		fmt.Fprintf(&b, ":%d:%d", p.Line, p.Column)
	}
	b.WriteString(": ")
	b.WriteString(p.What)
	if p.Mend != "" {
		b.WriteString("; ")
		b.WriteString(p.Mend)
	}
	return b.String()
}

// Problems is an error: all that is wrong in a file, in the order of its lines.
type Problems []Problem

// Error prints one problem a line.
func (p Problems) Error() string {
	lines := make([]string, len(p))
	for i := range p {
		lines[i] = p[i].String()
	}
	return strings.Join(lines, "\n")
}

func (p Problems) sort() {
	slices.SortStableFunc(p, func(a, b Problem) int {
		if a.Line != b.Line {
			return a.Line - b.Line
		}
		return a.Column - b.Column
	})
}

// nearest gives the word of the list that is fewest edits away from what was written; none if all are far.
func nearest(written string, words []string) (word string, ok bool) { return Nearest(written, words) }

// Nearest gives the word of a list that was most likely meant by one that is not in it.
func Nearest(written string, words []string) (word string, ok bool) {
	if len(written) > 64 {
		return "", false
	}
	best := min(4, 1+len(written)/3, len(written)) // a word with nothing left of it is not near
	for _, w := range words {
		if d := edits(strings.ToLower(written), strings.ToLower(w)); d < best {
			best, word, ok = d, w, true
		}
	}
	return word, ok
}

// edits is the number of letters to insert, drop, change or swap with the next (optimal string alignment distance)
// that turns a into b.
func edits(a, b string) int {
	before, above, row := make([]int, len(b)+1), make([]int, len(b)+1), make([]int, len(b)+1)
	for j := range above {
		above[j] = j
	}
	for i := 1; i <= len(a); i++ {
		row[0] = i
		for j := 1; j <= len(b); j++ {
			cost := 1
			if a[i-1] == b[j-1] {
				cost = 0
			}
			row[j] = min(above[j]+1, row[j-1]+1, above[j-1]+cost)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, above, row = above, row, before
	}
	return above[len(b)]
}
