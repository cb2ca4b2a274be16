package book

import (
	"fmt"
	"math"
	"regexp"
	"strings"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/grid"
)

// Use is what a column is for. It decides which number formats pass, since a format can show another value than the cell holds.
type Use int

const (
	// Any may hold readings or times: a number passes in a format that shows it as it is, a date as a date.
	Any Use = iota
	// Reading holds numbers; a date in it is refused.
	Reading
	// Text holds names and ids: a number passes if it is shown in full, in the format General or 0.
	Text
	// Other is not used; whatever its cells hold passes.
	Other
)

var (
	readingName = regexp.MustCompile(`(?i)^(?:(?:value|reading|result)s?[ _]?[0-9]{0,3}|nonconforming|inspected)$`)
	textName    = regexp.MustCompile(`(?i)^(?:id|source_id|source|lot|run_id|repeat_of|unit|material|analyst|instrument|role|position|replicate)$`)
)

// usualUse takes a column for what its name says.
func usualUse(name string) Use {
	switch name = strings.TrimSpace(name); {
	case readingName.MatchString(name):
		return Reading
	case textName.MatchString(name):
		return Text
	}
	return Any
}

// uses gives the use of each column.
func (o Options) uses(names []string) []Use {
	of := o.Use
	if of == nil {
		of = usualUse
	}
	out := make([]Use, len(names))
	for i, name := range names {
		out[i] = of(name)
	}
	return out
}

// shown gives a number, or the date it stands for, as text.
func (r *reader) shown(cell, raw string, x float64, style int, use Use) (string, error) {
	f, err := r.format(cell, style)
	if err != nil {
		return "", err
	}
	switch {
	case use == Text:
		return whole(cell, x, f)
	case f.date && use != Reading && r.options.RawDates:
		return grid.Shortest(x), nil
	case f.date && use != Reading:
		text, err := r.wallClock(raw)
		if err != nil {
			err = fmt.Errorf("cell %s: %v", cell, err)
		}
		return text, err
	case use != Other && !f.plain:
		return "", fmt.Errorf("cell %s is shown by the format %q, which changes its value; format it as a number", cell, clip(f.code))
	case use == Reading, use == Any:
		return padded(grid.Shortest(x), f.places), nil
	}
	return grid.Shortest(x), nil
}

// whole gives the number of a cell that stands for a text.
func whole(cell string, x float64, f format) (string, error) {
	text := grid.Shortest(x)
	switch {
	case !f.whole || f.code == "0" && x != math.Trunc(x):
		return "", fmt.Errorf("cell %s, which should hold a text, is the number %s shown by the format %q; format the column as text", cell, text, clip(f.code))
	case digits(text) > digitsMax || math.Abs(x) >= 1e15 || strings.ContainsAny(text, "eE"):
		return "", fmt.Errorf("cell %s, which should hold a text, is a number of more than %d digits; format the column as text", cell, digitsMax)
	}
	return text, nil
}

// checkDates refuses serial numbers of the other date system than the workbook's.
func (o Options) checkDates(from1904 bool) error {
	own := block.Serial1900
	if from1904 {
		own = block.Serial1904
	}
	if (o.Dates == block.Serial1900 || o.Dates == block.Serial1904) && o.Dates != own {
		return &block.Error{Problem: fmt.Sprintf("dates=%s: the workbook's own dates are %s", o.Dates, own), Advice: "leave dates= out if the times are date cells"}
	}
	return nil
}

func clip(s string) string {
	if r := []rune(s); len(r) > 40 {
		return string(r[:40]) + "..."
	}
	return s
}
