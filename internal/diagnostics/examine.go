package diagnostics

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

// Examine says what the data of the basis say against the limits computed from them. The request is the one that limits
// answered with the result; it is not changed. Where there are no limits, an empty result leaves out what needs them.
//
// Tests of kinds that are not known here are not made. Nothing is refused: what cannot be tested says so.
func Examine(req limits.Request, res limits.Result, about Times) Report {
	m := materialOf(&req)
	report := Report{Extent: m.extent(about)}
	switch req.Kind {
	case chart.Individuals, chart.XbarR, chart.XbarS, chart.RunMeans:
		if len(m.groups) > 0 {
			m.examineReadings(&report, &req, &res)
		}
	case chart.DuplicateRange, chart.RelativeRange:
		if len(m.groups) > 0 {
			m.examineDuplicates(&report, &res)
		}
	case chart.P, chart.NP, chart.C, chart.U:
		m.examineCounts(&report)
	default:
		return report
	}
	report.add(enough(&req, CodeTooFewRuns, "runs", report.Extent.Runs, AdvisedRuns))
	report.add(enough(&req, CodeTooFewDays, "days", report.Extent.Days, AdvisedDays))
	report.rates(req.Kind)
	return report
}

// examineReadings asks everything of kinds with readings, the rounding first.
func (m *material) examineReadings(report *Report, req *limits.Request, res *limits.Result) {
	m.prepare(req)
	report.Step, report.Tied = m.grid.step, m.tied()
	report.add(m.rounding(req))
	report.shape(m.values)
	plotted := m.values
	if m.means != nil {
		report.shape(m.means)
		report.add(m.variation())
		plotted = m.means
	}
	report.add(plotted.tails())
	report.add(correlation(plotted.subject, plotted.inOrder(), m.joined()))
	report.add(repeatedStretch(ReadingsInOrder, keysOf(m.readings), m.values.step/(2*math.Sqrt(math.Pi))))
	m.addDoubled(report)
	m.addSetup(report, req, res)
	m.draw(report)
}

// shape adds the tests of distribution.
func (r *Report) shape(s *sample) {
	r.add(s.normality())
	r.add(s.skewness())
	r.add(s.twoGroups())
}

// inOrder gives the values in order, zeros where they are all equal.
func (s *sample) inOrder() []float64 {
	if s.constant() {
		return make([]float64, s.n)
	}
	return s.z
}

func (m *material) joined() []bool {
	out := make([]bool, len(m.groups))
	for i, g := range m.groups {
		out[i] = g.joined
	}
	return out
}

// keysOf gives each value a key; equal values have equal ones.
func keysOf(values []float64) []int {
	keys := make([]int, len(values))
	for i, x := range values {
		keys[i] = int(math.Float64bits(x + 0)) // a zero without sign
	}
	return keys
}

// addDoubled looks for groups that are equal to the one before, reading by reading.
func (m *material) addDoubled(report *Report) {
	if m.kind == chart.Individuals {
		report.add(doubledPosts(IndividualValues, keysOf(m.readings), m.joined()))
		return
	}
	report.add(doubledPosts(Subgroups, m.groupKeys(), m.joined()))
}

// groupKeys gives each group a key; groups equal reading by reading have equal ones.
func (m *material) groupKeys() []int {
	numbers, keys := map[string]int{}, make([]int, len(m.groups))
	for i, g := range m.groups {
		var text []byte
		for _, x := range g.readings {
			bits := math.Float64bits(x + 0)
			for shift := 0; shift < 64; shift += 8 {
				text = append(text, byte(bits>>shift))
			}
		}
		if _, ok := numbers[string(text)]; !ok {
			numbers[string(text)] = len(numbers)
		}
		keys[i] = numbers[string(text)]
	}
	return keys
}

func (m *material) addSetup(report *Report, req *limits.Request, res *limits.Result) {
	s := m.setupOf(req, res)
	if s == nil {
		return
	}
	report.Setup = s.rows
	plotted := m.values
	if m.means != nil {
		plotted = m.means
	}
	report.add(s.test(plotted.step))
}

// examineCounts asks of counts only what does not need their distribution, which limits looks at.
func (m *material) examineCounts(report *Report) {
	counted, inspected := 0.0, 0.0
	numbers, keys := map[chart.Count]int{}, make([]int, len(m.groups))
	for i, g := range m.groups {
		counted, inspected = counted+g.count.Nonconforming, inspected+g.count.Inspected
		if _, ok := numbers[*g.count]; !ok {
			numbers[*g.count] = len(numbers)
		}
		keys[i] = numbers[*g.count]
	}
	// The standard deviation of a count is in proportion to the root of what was inspected, whatever the factor.
	e, largest := make([]float64, len(m.groups)), 0.0
	for i, g := range m.groups {
		e[i] = (g.count.Nonconforming - g.count.Inspected*(counted/inspected)) / math.Sqrt(g.count.Inspected)
		largest = max(largest, math.Abs(e[i]))
	}
	for i := range e {
		e[i] /= max(largest, math.SmallestNonzeroFloat64)
	}
	report.add(correlation(Counts, e, m.joined()))
	report.add(repeatedStretch(Counts, keys, 0))
	report.add(doubledPosts(Counts, keys, m.joined()))
}

// draw prepares the pictures.
func (m *material) draw(report *Report) {
	g := m.grid
	if m.step != g.step || !sameValues(m.readings, m.judged) {
		g = grid{} // a transformed scale has no even step
	}
	report.Values = &Picture{Subject: IndividualValues, Histogram: histogramOf(m.judged, g)}
	if m.means == nil {
		report.Values.NormalPlot = m.values.normalPlot(m.judged)
		return
	}
	report.Values.NormalPlot = m.values.normalPlot(nil)
	means := make([]float64, len(m.groups))
	for i, group := range m.groups {
		means[i] = decimal.Mean(group.judged, decimal.Unrounded)
	}
	report.Means = &Picture{SubgroupMeans, histogramOf(means, grid{}), m.means.normalPlot(nil)}
}

func sameValues(a, b []float64) bool {
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}
