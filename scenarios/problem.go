package scenarios

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
)

// Problem is one fault in a scenario: where it is, which key it is about, what
// is wrong and what to write instead.
type Problem struct {
	File      string // the scenario, a matrix, or an option such as "--set run.seed=x"
	Line, Col int    // from 1; 0 if the fault belongs to no place in the file
	Key       string // path of the key, such as "circuits.vx.slots"; may be empty
	Msg       string // what is wrong, without the key
	Hint      string // what to write instead; may be empty
}

// String joins the parts as "file:line:column: key: what; hint".
func (p Problem) String() string {
	var b strings.Builder
	b.WriteString(p.File)
	if p.Line > 0 {
		fmt.Fprintf(&b, ":%d:%d", p.Line, p.Col)
	}
	b.WriteString(": ")
	if p.Key != "" {
		b.WriteString(p.Key + ": ")
	}
	b.WriteString(p.Msg)
	if p.Hint != "" {
		b.WriteString("; " + p.Hint)
	}
	return b.String()
}

// Problems are all faults found in one scenario, sorted: the scenario's own
// file first, then its matrices, then options; within a file by place.
type Problems []Problem

// Error joins the problems, one a line.
func (p Problems) Error() string {
	lines := make([]string, len(p))
	for i := range p {
		lines[i] = p[i].String()
	}
	return strings.Join(lines, "\n")
}

// maxProblems is how many faults are kept; a file that is wrong throughout
// must not cost more memory than it has bytes.
const maxProblems = 1000

// faults gathers problems.
type faults struct {
	list    Problems
	dropped int
	files   []string // in the order in which their faults are listed
}

// add notes one fault.
func (f *faults) add(pos Pos, key, msg, hint string) {
	if f.full() {
		f.dropped++
		return
	}
	f.list = append(f.list, Problem{
		File: pos.File, Line: pos.Line, Col: pos.Col,
		Key: clip(key), Msg: clip(msg), Hint: clip(hint),
	})
}

// full reports whether further faults are only counted; suggestions, which cost
// time, are then not worth while.
func (f *faults) full() bool { return len(f.list) >= maxProblems }

// clip keeps a text that quotes the file short and on one line.
func clip(s string) string {
	const most = 400
	if len(s) > most {
		s = strings.ToValidUTF8(s[:most], "") + "..."
	}
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, s)
}

// err returns the sorted problems, or nil if there are none. Of problems that
// are alike in every part one is kept.
func (f *faults) err() error {
	if len(f.list) == 0 {
		return nil
	}
	rank := func(file string) int {
		if i := slices.Index(f.files, file); i >= 0 {
			return i
		}
		return len(f.files)
	}
	slices.SortStableFunc(f.list, func(a, b Problem) int {
		return cmp.Or(
			cmp.Compare(rank(a.File), rank(b.File)), cmp.Compare(a.File, b.File),
			cmp.Compare(a.Line, b.Line), cmp.Compare(a.Col, b.Col),
			cmp.Compare(a.Key, b.Key), cmp.Compare(a.Msg, b.Msg), cmp.Compare(a.Hint, b.Hint),
		)
	})
	list := slices.Compact(f.list)
	if f.dropped > 0 {
		list = append(list, Problem{
			File: list[len(list)-1].File,
			Msg:  fmt.Sprintf("%d more faults are not listed", f.dropped),
			Hint: "mend these first",
		})
	}
	return list
}

// near returns the word of words that is closest to s, or "" if none is close.
// Among equally close words the first wins.
func near(s string, words []string) string {
	if len(s) > 64 {
		return ""
	}
	best, most := "", max(1, len(s)/3)+1
	for _, w := range words {
		if d := distance(strings.ToLower(s), strings.ToLower(w)); d < most && w != s {
			best, most = w, d
		}
	}
	return best
}

// didYouMean turns the closest word into a hint; with no close word it lists
// the words, if they are few.
func didYouMean(s string, words []string) string {
	if a, b, ok := strings.Cut(s, "-"); ok && slices.Contains(words, b+"-"+a) { // a fibre named from its other end
		return fmt.Sprintf("did you mean %q?", b+"-"+a)
	}
	if w := near(s, words); w != "" {
		return fmt.Sprintf("did you mean %q?", w)
	}
	return oneOf(words)
}

// oneOf lists words as a hint, if they are few.
func oneOf(words []string) string {
	const few = 16
	if len(words) == 0 || len(words) > few {
		return ""
	}
	if len(words) == 1 {
		return "write " + words[0]
	}
	return "write one of " + strings.Join(words, ", ")
}

// distance is the number of bytes to insert, delete, replace or swap with
// their neighbour to make b of a (optimal string alignment).
func distance(a, b string) int {
	if d := len(a) - len(b); d > 24 || d < -24 {
		return 25
	}
	two, one, row := make([]int, len(b)+1), make([]int, len(b)+1), make([]int, len(b)+1)
	for j := range one {
		one[j] = j
	}
	for i := 1; i <= len(a); i++ {
		row[0] = i
		for j := 1; j <= len(b); j++ {
			c := 1
			if a[i-1] == b[j-1] {
				c = 0
			}
			row[j] = min(one[j-1]+c, one[j]+1, row[j-1]+1)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], two[j-2]+1)
			}
		}
		two, one, row = one, row, two
	}
	return one[len(b)]
}
