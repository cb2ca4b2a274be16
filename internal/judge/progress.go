package judge

import (
	"limitary/internal/chart"
	"limitary/internal/rules"
)

// Progress is a pattern on its way on one trace.
type Progress struct {
	Role chart.Role
	rules.Progress
}

// Progress lists the patterns a new segment would cut off.
func (j *Judge) Progress(st *State) (list []Progress) {
	for role, p := range j.plans {
		if p == nil {
			continue
		}
		for _, each := range p.Progress(st.traces[role]) {
			list = append(list, Progress{chart.Role(role), each})
		}
	}
	return list
}
