package sheet

import (
	"regexp"
	"sort"
	"strconv"
	"strings"
)

// valueName is a usual name of a column of readings: a stem and, where there are several, a number.
var valueName = regexp.MustCompile(`(?i)^(?:(value|reading|result)s?[ _]?([0-9]{0,3})|nonconforming)$`)

// valueColumns finds the columns of readings.
func (p *pasted) valueColumns(named string) ([]int, error) {
	var found []int
	if named != "" {
		for name := range strings.SplitSeq(named, ",") {
			at, err := p.column("values", strings.TrimSpace(name))
			if err != nil {
				return nil, err
			}
			found = append(found, at)
		}
		return found, p.distinct(found)
	}
	if len(p.Names) == 1 {
		return []int{0}, nil
	}
	return p.usualValues()
}

// usualValues finds the columns of readings by their usual names, in the order of their numbers; one without a number is
// the first. Columns of different stems, or twice the same number, are not taken for readings of one result.
func (p *pasted) usualValues() ([]int, error) {
	var found []int
	stem, byNumber := "", map[int]int{}
	order := map[int]int{}
	for i, name := range p.Names {
		m := valueName.FindStringSubmatch(name)
		if m == nil {
			continue
		}
		number := 1
		if m[2] != "" {
			number, _ = strconv.Atoi(m[2])
		}
		other, twice := byNumber[number]
		if mixed := len(found) > 0 && !strings.EqualFold(m[1], stem); mixed {
			other, twice = found[0], true
		}
		if twice {
			return nil, refuse("columns %s and %s may both be it; say values=", clip(p.Names[other]), clip(name))
		}
		stem, byNumber[number], order[i] = m[1], i, number
		found = append(found, i)
	}
	sort.SliceStable(found, func(a, b int) bool { return order[found[a]] < order[found[b]] })
	if len(found) == 0 {
		return nil, refuse("which columns hold the readings is not clear; say values=, some of %s", p.list())
	}
	return found, nil
}

func (p *pasted) distinct(columns []int) error {
	seen := map[int]bool{}
	for _, c := range columns {
		if seen[c] {
			return refuse("values=: column %s is named twice", p.Names[c])
		}
		seen[c] = true
	}
	return nil
}
