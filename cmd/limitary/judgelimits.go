package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"strings"

	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/report"
	"limitary/service"
)

// startLimits gives the limits as far as they do not depend on the file of results, and where they come from.
func (c *judgeCall) startLimits() (l judge.Limits, from string, err error) {
	if err := c.checkFlags(); err != nil {
		return l, "", usageError{err}
	}
	if c.limits != "" {
		l, from, err = readLimits(c.limits)
		return l, from, err
	}
	l = judge.Limits{Places: decimal.Unrounded}
	if l.Kind, err = parseKind(c.kind); err != nil {
		return l, "", usageError{err}
	}
	if !fromFigures(l.Kind) {
		return l, "", usageError{fmt.Errorf("--kind %s: centre and sigma do not say all of its limits; let \"limitary compute --kind %s --json\" write them, from results or from targets, and give them with --limits", l.Kind, l.Kind)}
	}
	if d := c.decimals.value; d != nil {
		if l.Places = *d; l.Places > decimal.PlacesMax {
			return l, "", usageError{fmt.Errorf("--decimals %d: want 0 to %d", l.Places, decimal.PlacesMax)}
		}
	}
	if l.Kind == chart.Given && c.size.value != nil {
		return l, "", usageError{errors.New("--size: statistics as given have no size; name a --kind")}
	}
	if s := c.sigma.value; s != nil && *s <= 0 {
		return l, "", usageError{fmt.Errorf("--sigma %v: want more than 0", *s)}
	}
	if l.Kind != chart.Given && (c.centre.value == nil || c.sigma.value == nil) {
		return l, "", usageError{errors.New("--centre and --sigma are needed, or --limits FILE")}
	}
	return l, c.givenText(l.Kind), nil
}

// givenText says which figures the call gives.
func (c *judgeCall) givenText(kind chart.Kind) string {
	var parts []string
	if c.centre.value != nil {
		parts = append(parts, "centre "+report.Shortest(*c.centre.value))
	}
	if c.sigma.value != nil {
		what := " of the statistic"
		if kind != chart.Given {
			what = " of a single reading"
		}
		parts = append(parts, "sigma "+report.Shortest(*c.sigma.value)+what)
	}
	if len(parts) == 0 {
		return "given lines only"
	}
	return "given: " + strings.Join(parts, ", ")
}

// traces builds both traces from centre and sigma, as package limits publishes them.
func (c *judgeCall) traces(l *judge.Limits) {
	if l.Kind == chart.Given {
		l.Traces[chart.Location] = &judge.Trace{Trace: traceOf(c.centre.value, c.sigma.value, l.Places)}
		return
	}
	sigma := *c.sigma.value
	l.ProcessSigma = decimal.Round(sigma, l.Places)
	at, _ := limits.At(l.Kind, l.ProcessSigma, l.SubgroupSize)
	l.Traces[chart.Location] = &judge.Trace{Trace: traceOf(c.centre.value, &at.LocationSigma, l.Places)}
	spread := traceOf(&at.DispersionCentre, &at.DispersionSigma, l.Places)
	for _, line := range []*chart.Line{&spread.LowerAction, &spread.LowerWarning} {
		if line.Value <= 0 {
			*line = chart.Line{Basis: chart.Absent}
		}
	}
	l.Traces[chart.Dispersion] = &judge.Trace{Trace: spread}
}

// traceOf rounds the centre and places the lines at whole multiples of sigma; without both there are none.
func traceOf(centre, sigma *float64, places int) chart.Trace {
	t := chart.Trace{Sigma: sigma}
	if centre != nil {
		rounded := decimal.Round(*centre, places)
		t.Centre = &rounded
	}
	at := func(z float64) chart.Line {
		if centre == nil || sigma == nil {
			return chart.Line{Basis: chart.Absent}
		}
		return chart.Line{Value: decimal.Line(*t.Centre, z, *sigma, places), Basis: chart.SigmaMultiple}
	}
	t.LowerAction, t.UpperAction = at(-chart.ActionMultiple), at(chart.ActionMultiple)
	t.LowerWarning, t.UpperWarning = at(-chart.WarningMultiple), at(chart.WarningMultiple)
	return t
}

// place sets the lines that do not follow from sigma, and the rules.
func (c *judgeCall) place(l *judge.Limits, chosen choice) error {
	fixed, err := c.fixed.fixed()
	if err != nil {
		return err
	}
	for role := range chart.Roles {
		t := l.Traces[role]
		lines := [4]*chart.Line{fixed[role].LowerAction, fixed[role].UpperAction, fixed[role].LowerWarning, fixed[role].UpperWarning}
		for i, line := range lines {
			switch {
			case line == nil:
				continue
			case t == nil:
				return fmt.Errorf("--%s: statistics as given make one trace; name a --kind for a second", flagOf(role, i))
			case l.Places != decimal.Unrounded && line.Basis != chart.Absent && decimal.Places(line.Value) > l.Places:
				return fmt.Errorf("--%s %v: has more decimals than the %d that are published, and a criterion is not moved by rounding", flagOf(role, i), line.Value, l.Places)
			}
			*[4]*chart.Line{&t.LowerAction, &t.UpperAction, &t.LowerWarning, &t.UpperWarning}[i] = *line
		}
		if t == nil {
			continue
		}
		if lower, upper := t.LowerAction, t.UpperAction; lower.Basis != chart.Absent && upper.Basis != chart.Absent && lower.Value >= upper.Value {
			return fmt.Errorf("--%s %v: is not below the upper action line, %v", flagOf(role, 0), lower.Value, upper.Value)
		}
		t.Rules = chosen.specs[role]
		if err := c.fixed.watched(role, t.Rules); err != nil {
			return err
		}
	}
	return nil
}

// limitsBytesMax bounds a file of limits: one with a hundred thousand exclusions is smaller.
const limitsBytesMax = 16 << 20

// fromFigures reports whether centre and sigma alone say the limits of a kind.
func fromFigures(kind chart.Kind) bool { return kind == chart.Given || plainReadings(kind) }

// givenKinds names the kinds that --kind takes beside --centre and --sigma.
func givenKinds() string { return kindsThat(fromFigures) }

// readLimits reads what compute --json wrote.
func readLimits(path string) (l judge.Limits, from string, err error) {
	in, l, err := readComputed("--limits", path)
	if err != nil {
		return l, "", err
	}
	figures := "process sigma " + report.Fixed(l.ProcessSigma, l.Places)
	if t := l.Traces[chart.Location]; t != nil {
		centre := "centre " + report.FixedOr(t.Centre, l.Places, "none")
		if figures = centre + ", " + figures; l.Kind.Counts() {
			figures = centre
		}
	}
	from = fmt.Sprintf("from %s: %s, from %s", report.Foreign(path), figures, report.Count(int(in.N), "result"))
	if in.Provisional {
		from += "; PROVISIONAL, fewer than the advised " + fmt.Sprint(in.AdvisedMinimum)
	}
	return l, from, nil
}

// readComputed reads what compute --json wrote, for a flag.
func readComputed(flag, path string) (in *pb.ComputeLimitsResponse, l judge.Limits, err error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, l, fmt.Errorf("%s: %w", flag, err)
	}
	defer file.Close()
	raw, err := io.ReadAll(io.LimitReader(file, limitsBytesMax+1))
	if err != nil {
		return nil, l, fmt.Errorf("%s: %w", flag, err)
	}
	if len(raw) > limitsBytesMax {
		return nil, l, fmt.Errorf("%s %s: is larger than %d bytes, the limit", flag, path, limitsBytesMax)
	}
	in = &pb.ComputeLimitsResponse{}
	if err := protojson.Unmarshal(raw, in); err != nil {
		return nil, l, fmt.Errorf("%s %s: is not what \"limitary compute --json\" writes: %w", flag, path, err)
	}
	if l, err = service.ComputedLimits(in); err != nil {
		return nil, l, fmt.Errorf("%s %s: %w", flag, path, err)
	}
	return in, l, nil
}
