package skid

import (
	"errors"
	"fmt"
	"sort"
	"strings"
)

// Place is a position in a skid file, both from 1; zero when it is not known.
type Place struct{ Line, Col int }

// Problem is one thing wrong, or doubtful, in a skid file. Path names the value (throws[0].bore_mm), Msg says what
// is wrong or odd, Fix says what to write or look at instead.
type Problem struct {
	File string
	Place
	Path string
	Msg  string
	Fix  string
}

// Error gives file:line:column: path: what is wrong; what to write instead.
func (p Problem) Error() string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s:%d:%d: ", p.File, p.Line, p.Col)
	if p.Path != "" {
		b.WriteString(p.Path + ": ")
	}
	b.WriteString(p.Msg)
	if p.Fix != "" {
		b.WriteString("; " + p.Fix)
	}
	return b.String()
}

// Problems takes the problems out of an error of Parse or Load, in the order of the file. An error of another
// origin has none.
func Problems(err error) []Problem {
	if err == nil {
		return nil
	}
	var one Problem
	if joined, ok := err.(interface{ Unwrap() []error }); ok {
		var out []Problem
		for _, e := range joined.Unwrap() {
			out = append(out, Problems(e)...)
		}
		return out
	}
	if errors.As(err, &one) {
		return []Problem{one}
	}
	return nil
}

// join puts problems in the order of the file and makes one error of them; nil when there are none.
func join(ps []Problem) error {
	if len(ps) == 0 {
		return nil
	}
	sortProblems(ps)
	errs := make([]error, len(ps))
	for i, p := range ps {
		errs[i] = p
	}
	return errors.Join(errs...)
}

func sortProblems(ps []Problem) {
	sort.SliceStable(ps, func(i, j int) bool {
		a, b := ps[i], ps[j]
		if a.Line != b.Line {
			return a.Line < b.Line
		}
		return a.Col < b.Col
	})
}
