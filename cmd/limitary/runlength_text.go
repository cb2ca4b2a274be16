package main

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/report"
	"limitary/internal/runlength"
	"limitary/internal/runlength/picture"
	"limitary/service"
)

func sorted(names []string) []string {
	slices.Sort(names)
	return names
}

// report writes the answer as text.
func (c *runLengthCall) report(result *service.RunLengthResult) error {
	t, m := report.NewText(c.env.Stdout), result.Message
	t.Title("Run lengths: what the rules cost and what they catch\n")
	t.Pairs(
		report.Pair{Label: "rules that end a run", Value: strings.Join(m.EndingRules, ", ")},
		report.Pair{Label: "shifts", Value: "in " + result.Answer.ShiftUnit.String()},
		report.Pair{Label: "points", Value: pointsText(&c.in)},
		report.Pair{Label: "start", Value: startText(c.in.Start)},
		report.Pair{Label: "computed", Value: fmt.Sprintf("%s, program %s, judge %d", c.env.Now().Format("2006-01-02"), programNumber(), judgeNumber)},
	)
	c.lengths(t, m)
	if err := t.Flush(); err != nil {
		return err
	}
	t.Section("Distribution")
	if err := t.Flush(); err != nil {
		return err
	}
	if err := picture.Bars(c.env.Stdout, distributions(result, 2)); err != nil {
		return err
	}
	t = report.NewText(c.env.Stdout)
	c.rates(t, m)
	c.marginals(t, m)
	c.candidates(t, m)
	realLimits(t, m.RealLimits)
	t.Section("What this rests on")
	t.Paragraph("Run lengths count points, the signalling one included; points are independent unless a correlation is given. " +
		"The rates are nominal: real points are neither exactly normal nor independent, and limits are estimated. " +
		"False alarms are expected; a signal is statistical evidence about the measuring process, not a compliance, release or safety decision.")
	return t.Flush()
}

func pointsText(in *pb.RunLengthRequest) string {
	parts := []string{map[pb.DataShape]string{pb.DataShape_DATA_SHAPE_STUDENT: fmt.Sprintf("Student's t with %v degrees of freedom", in.GetData().GetDegreesOfFreedom()),
		pb.DataShape_DATA_SHAPE_GAMMA: fmt.Sprintf("gamma of shape %v", in.GetData().GetGammaShape())}[in.GetData().GetShape()]}
	if parts[0] == "" {
		parts[0] = "normal"
	}
	if r := in.SigmaRatio; r != nil {
		parts = append(parts, fmt.Sprintf("sigma %v times that of the limits", *r))
	}
	if s := in.GetData().GetRoundingStep(); s != 0 {
		parts = append(parts, fmt.Sprintf("rounded to %v sigma", s))
	}
	if r := in.GetData().GetCorrelation(); r != 0 {
		parts = append(parts, fmt.Sprintf("neighbours correlated by %v", r))
	}
	return strings.Join(parts, ", ")
}

func startText(s pb.RunStart) string {
	switch s {
	case pb.RunStart_RUN_START_STEADY_STATE:
		return "steady state: in control for long, no signal, then the change"
	case pb.RunStart_RUN_START_SEGMENT:
		return "a new segment, no head start"
	}
	return "a fresh chart, head starts counting"
}

// lengthText writes a run length with what its size allows.
func lengthText(x float64) string {
	switch {
	case x >= 1e7:
		return report.Significant(x, 5)
	case x >= 1000:
		return report.Fixed(x, 1)
	case x >= 10:
		return report.Fixed(x, 3)
	}
	return report.Fixed(x, 4)
}

// probability writes a probability so that what is not certain is not said to be.
func probability(p float64) string {
	if p < 1 && p > 0.99995 {
		return ">0.9999"
	}
	return report.Significant(p, 4)
}

// lengths writes the table of run lengths.
func (c *runLengthCall) lengths(t *report.Text, m *pb.RunLengthResponse) {
	t.Section("Points to the first signal")
	names := []string{">shift", ">ARL", ">SDRL"}
	for _, q := range m.Rows[0].Quantiles {
		names = append(names, fmt.Sprintf(">%v %%", report.Significant(100*q.Probability, 6)))
	}
	for _, w := range m.Rows[0].Within {
		names = append(names, fmt.Sprintf(">within %d", w.Points))
	}
	if m.Rows[0].HeadStartWithin_20Points != nil {
		names = append(names, ">within 20 of the head start")
	}
	names = append(names, "computation", ">error below")
	table := report.NewTable(names...)
	for _, r := range m.Rows {
		cells := []string{report.Shortest(r.Shift), lengthText(r.Arl), lengthText(r.Sdrl)}
		for _, q := range r.Quantiles {
			cells = append(cells, report.Significant(q.Points, 10))
		}
		for _, w := range r.Within {
			cells = append(cells, probability(w.Probability))
		}
		if r.HeadStartWithin_20Points != nil {
			cells = append(cells, probability(*r.HeadStartWithin_20Points))
		}
		table.Row(append(cells, computationWord(r), report.Significant(r.ErrorBound, 2))...)
	}
	t.Table(table)
}

func computationWord(r *pb.RunLengthRow) string {
	word := strings.ToLower(strings.ReplaceAll(enumWord(r.Computation.String(), "COMPUTATION_"), "_", " "))
	if r.StandardError != nil {
		word += fmt.Sprintf(" of %d runs, standard error %s", r.SimulatedRuns, report.Significant(*r.StandardError, 2))
	}
	return word
}

// rates writes the long-run rates, apart from the ARL and from each other.
func (c *runLengthCall) rates(t *report.Text, m *pb.RunLengthResponse) {
	if m.Rows[0].Rates == nil {
		return
	}
	t.Section("In the long run, of a chart that nobody resets")
	table := report.NewTable(">shift", ">points flagged per 1000", ">signals opened per 1000", ">signals a week", ">points flagged a week", "computation")
	for _, r := range m.Rows {
		cells := []string{report.Shortest(r.Shift), report.Significant(r.Rates.PointsFlaggedPer_1000, 5), report.Significant(r.Rates.SignalsOpenedPer_1000, 5), "", ""}
		if r.Workload != nil {
			cells[3], cells[4] = report.Significant(r.Workload.SignalsPerWeek, 4), report.Significant(r.Workload.PointsFlaggedPerWeek, 4)
		}
		table.Row(append(cells, strings.ToLower(strings.ReplaceAll(enumWord(r.Rates.Computation.String(), "COMPUTATION_"), "_", " ")))...)
	}
	t.Table(table)
	t.Paragraph("A signal is an episode of one rule on one side; it may flag several points, and several rules may flag one point. Neither rate is 1000 over the ARL.")
}

// marginals writes what each rule adds.
func (c *runLengthCall) marginals(t *report.Text, m *pb.RunLengthResponse) {
	if len(m.MarginalTable) == 0 {
		return
	}
	t.Section("What each rule adds to those before it")
	names := []string{"rule", ">ARL in control", ">false alarms per 1000", ">added", ">alone, ARL"}
	for _, r := range m.MarginalTable[0].Shifted {
		names = append(names, fmt.Sprintf(">ARL at %v", r.Shift), ">saved")
	}
	table := report.NewTable(names...)
	for _, r := range m.MarginalTable {
		cells := []string{r.Rule, lengthText(r.InControl.Arl), report.Fixed(r.FalseAlarmsPer_1000, 3), report.Fixed(r.FalseAlarmsAddedPer_1000, 3), lengthText(r.AloneArl)}
		for i, s := range r.Shifted {
			cells = append(cells, lengthText(s.Arl), report.Fixed(r.PointsSaved[i], 3))
		}
		table.Row(cells...)
	}
	t.Table(table)
	t.Paragraph("False alarms per 1000 is 1000 over the ARL in control; saved is by how many points the rule shortens the ARL at the shift.")
}

// candidatesShown is how many candidates the report lists; the JSON has all.
const candidatesShown = 25

func (c *runLengthCall) candidates(t *report.Text, m *pb.RunLengthResponse) {
	if len(m.Candidates) == 0 {
		return
	}
	t.Section(fmt.Sprintf("Subsets with an ARL in control of at least %v, by ARL at shift %v", c.in.Choice.InControlArlMin, c.in.Choice.Shift))
	table := report.NewTable(">rank", ">ARL in control", ">ARL at the shift", "rules")
	shown := 0
	for _, one := range m.Candidates {
		if !one.WithinBudget || shown == candidatesShown {
			break
		}
		shown++
		what := one.Label
		if what == "" {
			what = strings.Join(one.Rules, ", ")
		}
		table.Row(fmt.Sprint(one.Rank), lengthText(one.InControl.Arl), lengthText(one.Shifted.Arl), what)
	}
	t.Table(table)
	text := fmt.Sprintf("%d of %d candidates shown.", shown, len(m.Candidates))
	if c.in.Choice.BasisPoints > 0 {
		text += fmt.Sprintf(" Candidates of equal rank cannot be told apart with limits from %d points.", c.in.Choice.BasisPoints)
	}
	t.Paragraph(text)
}

func realLimits(t *report.Text, r *pb.RealLimits) {
	if r == nil {
		return
	}
	t.Section("What limits estimated from data will do")
	table := report.NewTable("figure", ">with true limits", ">10 %", ">median", ">90 %")
	row := func(name string, nominal float64, s *pb.Spread) {
		table.Row(name, report.Significant(nominal, 5), report.Significant(s.Low, 4), report.Significant(s.Median, 4), report.Significant(s.High, 4))
	}
	row("ARL in control", r.NominalArl, r.Arl)
	row("false alarms per 1000", 1000/r.NominalArl, r.FalseAlarmsPer_1000)
	row("ARL at the shift", r.NominalShiftedArl, r.ShiftedArl)
	row(fmt.Sprintf("power, %s", report.Count(int(r.PowerPoints), "point")), r.NominalPower, r.Power)
	t.Table(table)
	needed := "no number of points up to 100000 keeps"
	if r.PointsNeeded != nil {
		needed = fmt.Sprintf("%d points or subgroups keep", *r.PointsNeeded)
	}
	t.Paragraph(fmt.Sprintf("Sigma is estimated with %.1f degrees of freedom. With %v %% assurance, %s the false alarms at most %v times the nominal ones. "+
		"The figures are good to %s %%.", r.DegreesOfFreedom, 100*r.Assurance, needed, r.Factor, report.Significant(100*r.RelativeError, 1)))
}

// distributions gives the curves of the first rows, the last row among them.
func distributions(result *service.RunLengthResult, most int) (all []picture.Distribution) {
	rows := result.Answer.Rows
	if len(rows) > most {
		rows = append(slices.Clone(rows[:most-1]), rows[len(rows)-1])
	}
	for i := range rows {
		all = append(all, picture.Distribution{Label: fmt.Sprintf("shift %v", rows[i].Shift), Within: within(&rows[i])})
	}
	return all
}

func within(r *runlength.Row) func(int) float64 {
	if r.Curve != nil {
		return r.Curve.Within
	}
	return r.Lengths.Within
}

// draw writes the picture whole or not at all.
func (c *runLengthCall) draw(result *service.RunLengthResult) error {
	file, err := os.CreateTemp(filepath.Dir(c.plot), ".plot-*")
	if err != nil {
		return fmt.Errorf("--plot: %w", err)
	}
	defer os.Remove(file.Name())
	subtitle := fmt.Sprintf("Shifts in %s. Rules: %s", result.Answer.ShiftUnit, report.ForeignLong(strings.Join(result.Message.EndingRules, ", ")))
	err = picture.SVG(file, "Points to the first signal", subtitle, distributions(result, picture.CurvesMax))
	if err == nil {
		err = file.Chmod(0o644)
	}
	if closed := file.Close(); err == nil {
		err = closed
	}
	if err == nil {
		err = os.Rename(file.Name(), c.plot)
	}
	if err != nil {
		return fmt.Errorf("--plot %s: %w", c.plot, err)
	}
	return nil
}
