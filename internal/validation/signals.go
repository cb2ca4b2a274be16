package validation

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// Signals is the subject of the worked examples' signals: the points that the judge finds beyond the limits of each
// example, held against those that its source names. It stands apart from Groups because it needs the judge as well.
func Signals() Group { return Group{"signals of worked examples", signalChecks} }

// signalling is what a worked example says of its signals, in the names of its file.
type signalling struct {
	example
	counts struct {
		C, Nonconforming, Nonconformities []float64
		N                                 float64
		Units                             []float64 `json:"inspection_units"`
	}
	Parameters struct {
		Lambda, Start, Sigma, Mu0, K, H float64
		KSigma                          float64 `json:"k_sigma"`
	}
	Signals map[string][]int
}

// asked tells how to find the points of each kind of answer.
var asked = map[string]func(*signalling) ([]int, error){
	"beyond_3sigma":                (*signalling).beyond,
	"beyond_3sigma_1based":         (*signalling).beyond,
	"beyond_revised_limits_1based": (*signalling).beyondRevised,
	"beyond_limits":                (*signalling).average,
	"C_plus_exceeds_H_1based":      func(s *signalling) ([]int, error) { return s.sums(rules.UpperOnly) },
	"C_minus_exceeds_H":            func(s *signalling) ([]int, error) { return s.sums(rules.LowerOnly) },
}

// onTheLine names the answer that lists points on a line: they are checked not to signal.
const onTheLine = "exactly_on_UCL_1based"

func signalChecks(context.Context) ([]Check, error) {
	var file struct{ Examples []json.RawMessage }
	if err := readJSON(examplesFile, &file); err != nil {
		return nil, err
	}
	var checks []Check
	for _, raw := range file.Examples {
		s := &signalling{}
		var counts struct{ Data json.RawMessage }
		err := json.Unmarshal(raw, s)
		if err == nil {
			err = json.Unmarshal(raw, &counts)
		}
		if err == nil {
			err = json.Unmarshal(counts.Data, &s.counts)
		}
		if err != nil {
			return checks, fmt.Errorf("%s: %w", examplesFile, err)
		}
		more, err := s.check()
		checks = append(checks, more...)
		if err != nil {
			return checks, fmt.Errorf("%s: %w", s.ID, err)
		}
	}
	return checks, nil
}

// check gives one check for the number of points that signal and one for each of them.
func (s *signalling) check() (checks []Check, err error) {
	exactly := func(name string, want, got int) {
		checks = append(checks, Check{Name: s.ID + ": " + name, Source: s.Source, Want: float64(want), Printed: true}.Compare(float64(got)))
	}
	for _, name := range sortedKeys(s.Signals) {
		if name == onTheLine {
			points, err := s.beyond()
			if err != nil {
				return checks, err
			}
			for _, p := range s.Signals[name] {
				exactly(fmt.Sprintf("signals at point %d, which lies on the line", p), 0, among(points, p))
			}
			continue
		}
		find, ok := asked[name]
		if !ok {
			return checks, fmt.Errorf("no way is known to answer %q", name)
		}
		points, err := find(s)
		if err != nil {
			return checks, err
		}
		exactly(name+", number of points", len(s.Signals[name]), len(points))
		for _, p := range s.Signals[name] {
			exactly(fmt.Sprintf("%s, signals at point %d", name, p), 1, among(points, p))
		}
	}
	return checks, nil
}

func sortedKeys(m map[string][]int) (keys []string) {
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

func among(points []int, p int) int {
	if slices.Contains(points, p) {
		return 1
	}
	return 0
}

var beyondThree = rules.Spec{ID: "beyond-3", Kind: rules.Beyond, Consequence: rules.Stop, K: 1, M: 1, Z: 3}

// beyond gives the points beyond three sigmas of either trace, counted from 1.
func (s *signalling) beyond() ([]int, error) {
	switch {
	case s.Kind != "":
		return s.beyondComputed()
	case s.counts.C != nil:
		mean := meanOf(s.counts.C)
		return judged(mean, math.Sqrt(mean), beyondThree, s.counts.C, nil)
	case s.counts.Nonconforming != nil:
		return s.fractions(nil)
	case s.counts.Nonconformities != nil:
		return s.perUnit()
	}
	return nil, fmt.Errorf("the data are of no known kind")
}

// beyondComputed judges an example of a kind that package limits computes.
func (s *signalling) beyondComputed() ([]int, error) {
	req, err := s.request()
	if err != nil {
		return nil, err
	}
	res, err := limits.Compute(req)
	if err != nil {
		return nil, err
	}
	l := judge.Limits{Kind: res.Kind, SubgroupSize: res.SubgroupSize, Places: res.PublishedDecimals, ProcessSigma: res.ProcessSigma}
	for role, t := range [...]chart.Trace{res.Location, res.Dispersion} {
		l.Traces[role] = &judge.Trace{Trace: t, Rules: []rules.Spec{beyondThree}}
	}
	points := make([]judge.Point, len(req.Groups))
	for i, g := range req.Groups {
		points[i].Readings = g.Readings
	}
	return walked(l, points)
}

// fractions judges fractions nonconforming of samples of one size; the mean leaves out some, counted from 1.
func (s *signalling) fractions(leftOut []int) ([]int, error) {
	var all, used []float64
	for i, x := range s.counts.Nonconforming {
		all = append(all, x/s.counts.N)
		if !slices.Contains(leftOut, i+1) {
			used = append(used, x)
		}
	}
	p := meanOf(used) / s.counts.N
	return judged(p, math.Sqrt(p*(1-p)/s.counts.N), beyondThree, all, nil)
}

// beyondRevised judges all samples by limits that leave out those beyond the first ones.
func (s *signalling) beyondRevised() ([]int, error) {
	out, err := s.beyond()
	if err != nil {
		return nil, err
	}
	return s.fractions(out)
}

// perUnit judges nonconformities per inspection unit where the inspected size differs: each point has its own sigma.
func (s *signalling) perUnit() ([]int, error) {
	rate := meanOf(s.counts.Nonconformities) / meanOf(s.counts.Units)
	var xs, sigmas []float64
	for i, x := range s.counts.Nonconformities {
		xs, sigmas = append(xs, x/s.counts.Units[i]), append(sigmas, math.Sqrt(rate/s.counts.Units[i]))
	}
	return judged(rate, sigmas[0], beyondThree, xs, sigmas)
}

func (s *signalling) average() ([]int, error) {
	p := s.Parameters
	return judged(p.Start, p.Sigma, rules.Spec{ID: "average", Kind: rules.EWMA, Consequence: rules.Act, Lambda: p.Lambda, Limit: p.KSigma}, s.example.Data.X, nil)
}

func (s *signalling) sums(sides rules.Sides) ([]int, error) {
	p := s.Parameters
	return judged(p.Mu0, p.Sigma, rules.Spec{ID: "sum", Kind: rules.CUSUM, Consequence: rules.Act, Sides: sides, Reference: p.K, Interval: p.H}, s.example.Data.X, nil)
}

func meanOf(xs []float64) float64 { return decimal.Mean(xs, decimal.Unrounded) }

// judged gives the statistics, counted from 1, at which the rule completes. Sigmas are those of the points, where they
// differ.
func judged(centre, sigma float64, rule rules.Spec, xs, sigmas []float64) ([]int, error) {
	l := judge.Limits{Places: decimal.Unrounded}
	l.Traces[chart.Location] = &judge.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: []rules.Spec{rule}}
	points := make([]judge.Point, len(xs))
	for i := range xs {
		points[i].Readings = xs[i : i+1]
		if sigmas != nil {
			points[i].Sigma = &sigmas[i]
		}
	}
	return walked(l, points)
}

// walked judges the points one by one.
func walked(l judge.Limits, points []judge.Point) (found []int, err error) {
	j, err := judge.New(l)
	if err != nil {
		return nil, err
	}
	st, v := j.NewState(), judge.Verdict{}
	for i, p := range points {
		j.Judge(st, p, &v)
		if v.Standing > judge.Clear {
			found = append(found, i+1)
		}
	}
	return found, nil
}
