package sheet

import "limitary/internal/sheet/grid"

// Safety is what everyone who uses an answer must know. Workbooks have it as the sheet "About".
var Safety = []string{
	"A signal is statistical evidence about the measuring process. It is not a compliance, release or safety decision.",
	"A clear standing does not mean that the result is right. Silence proves nothing for runs that were not posted.",
	"Control limits are not specification or legal limits unless marked as method criterion or target, and are never compared with customer samples.",
	"The accredited method, the regulator's programme, statutory requirements and the laboratory's quality manual take precedence.",
	"Results tied to an unresolved control failure may not be usable to show compliance.",
	"Decisions to release, withhold, recall or resume belong to authorised, licensed or competent people.",
	"No answer from the service means not judged.",
	"False alarms are expected; a rate that is shown is the nominal one.",
	"Validate before use. Not for patient results, closed-loop control or life protection.",
}

// about makes the sheet that says what a workbook is.
func (h *Handler) about(name string) *grid.Table {
	t := &grid.Table{Name: "About", Columns: []string{"About", "Value"}}
	add := func(what string, v grid.Value) { t.Rows = append(t.Rows, []grid.Value{grid.Of(what), v}) }
	add("Contents", grid.Of(name))
	add("Made at (UTC)", grid.Moment(h.now()))
	add("Copy", grid.Of("These are the numbers of that moment. They do not change here when limits change there."))
	add("Text", grid.Of("A text that could be taken for a formula has an apostrophe before it."))
	for _, line := range Safety {
		add("Safety", grid.Of(line))
	}
	return t
}
