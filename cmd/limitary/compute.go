package main

import (
	"context"
	"errors"
	"fmt"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/report"
	"limitary/internal/report/judged"
	"limitary/service"
)

const computeAbout = `Computes control limits from a file of control results: both traces, what they rest on, all estimators of
sigma side by side, intervals, findings, and the signals of the same results against these limits. FILE is delimited
text with a header line; "-" reads standard input.

A chart of kind individuals takes one reading a row. xbar_r and xbar_s take subgroups: several --value columns, or one
and a --subgroup column. Nothing is stored; "limitary judge --limits" judges by what --json prints.

It ends with 0 where limits were computed, whatever the signals, with 1 where the file does not give any, and with 2
where it was called wrongly.`

// computeCall is one call of the command.
type computeCall struct {
	env                                      *environment
	source                                   sourceFlags
	fixed                                    lineFlags
	rules                                    ruleFlags
	kind, estimator, title, unit, plot, file string
	centre, sigma                            numberFlag
	size, decimals                           countFlag
	json                                     bool
}

func runCompute(ctx context.Context, env *environment, args []string) int {
	c := &computeCall{env: env}
	f := newFlags(env, "compute --kind KIND [flags] FILE", computeAbout)
	f.StringVar(&c.kind, "kind", "", "`KIND` of chart: individuals, xbar_r or xbar_s")
	f.Var(&c.size, "size", "`N` readings in a full subgroup; if not given, the most that a result of the file has")
	c.source.register(f, true)
	f.StringVar(&c.estimator, "estimator", "", "`NAME` of the estimator of sigma; if not given, the usual one of the kind")
	f.Var(&c.centre, "centre", "`C`: the centre is a target, not estimated")
	f.Var(&c.sigma, "sigma", "`S`: the standard deviation of a single reading is a target, not estimated")
	f.Var(&c.decimals, "decimals", "`D` published decimals; if not given, chosen from the results")
	c.fixed.register(f)
	c.rules.register(f)
	registerOutput(f, &c.title, &c.unit, &c.plot, &c.json)
	rest, code, done := f.parse(args, 1, 1)
	if done {
		return code
	}
	c.file = rest[0]
	return finish(env, "compute", c.run(ctx))
}

// registerOutput adds the flags that say what a command gives.
func registerOutput(f *flagSet, title, unit, plot *string, json *bool) {
	f.StringVar(title, "title", "", "`TEXT` above the report and the picture")
	f.StringVar(unit, "unit", "", "`UNIT` of the results, for report and picture")
	f.StringVar(plot, "plot", "", "write a picture of the chart to `FILE.svg`")
	f.BoolVar(json, "json", false, "print the service's own JSON instead of the report")
}

// finish tells of an error and gives the exit code.
func finish(env *environment, command string, err error) int {
	if err == nil {
		return exitOK
	}
	var wrong usageError
	if errors.As(err, &wrong) {
		fmt.Fprintf(env.Stderr, "limitary: %v\n\"limitary %s --help\" tells more.\n", err, command)
		return exitUsage
	}
	return fail(env, "%v", err)
}

func (c *computeCall) run(ctx context.Context) error {
	req, rulesChosen, err := c.request()
	if err == nil {
		err = checkPlotPath(c.plot, c.file)
	}
	if err != nil {
		return usageError{err}
	}
	src, err := c.source.read(ctx, c.env, c.file)
	if err != nil {
		return err
	}
	if req.SubgroupSize, err = sizeFor(req.Kind, c.size.value, src); err != nil {
		return err
	}
	groups, rowOf, err := groupsOf(src)
	if err != nil {
		return err
	}
	req.Groups = groups
	res, err := limits.Compute(req)
	if err != nil {
		return limitsFault(err, src, rowOf)
	}
	return c.answer(ctx, src, res, groups, rowOf, rulesChosen)
}

// request turns the flags into a request without data.
func (c *computeCall) request() (req limits.Request, chosen choice, err error) {
	if c.kind == "" {
		return req, chosen, fmt.Errorf("--kind is not given; want individuals, xbar_r or xbar_s")
	}
	if req.Kind, err = parseKind(c.kind); err != nil {
		return req, chosen, err
	}
	if c.estimator != "" {
		name := strings.ToUpper(strings.ReplaceAll(c.estimator, "-", "_"))
		if req.Estimator, err = limits.ParseEstimator(name); err != nil || req.Estimator == limits.DefaultEstimator {
			return req, chosen, fmt.Errorf("--estimator %q: want one of %v", c.estimator, limits.EstimatorsOf(req.Kind))
		}
	}
	req.Centre, req.Sigma, req.PublishedDecimals = c.centre.value, c.sigma.value, c.decimals.value
	if req.Fixed, err = c.fixed.fixed(); err != nil {
		return req, chosen, err
	}
	if chosen, err = c.rules.choose(req.Kind); err != nil {
		return req, chosen, err
	}
	for role := range chart.Roles {
		if err := c.fixed.watched(role, chosen.specs[role]); err != nil {
			return req, chosen, err
		}
	}
	return req, chosen, nil
}

// sizeFor gives the subgroup size: the one asked for, or the most readings a result has.
func sizeFor(kind chart.Kind, asked *int, src *source) (int, error) {
	most := 0
	for i := range src.table.Len() {
		most = max(most, len(src.table.Figures(i)))
	}
	size := most
	if kind == chart.Individuals || kind == chart.Given {
		size = 1
	}
	if asked != nil {
		size = *asked
		if err := kind.CheckSize(size); err != nil {
			return 0, usageError{fmt.Errorf("--size %d: %w", size, err)}
		}
	}
	var wrong *judged.SizeError
	switch err := judged.CheckSizes(src.table, size); {
	case errors.As(err, &wrong) && size == 1:
		return 0, fmt.Errorf("%s: line %d: the result has %d readings, and a chart of this kind takes one; "+
			"choose one column with --value, or --kind xbar_r or xbar_s", src.name, wrong.Line, wrong.Readings)
	case err != nil:
		return 0, fmt.Errorf("%s: %w; is --size right?", src.name, err)
	}
	if (kind == chart.XbarR || kind == chart.XbarS) && size < 2 {
		return 0, fmt.Errorf("%s: every result has one reading, and a chart of kind %s takes subgroups; "+
			"name several --value columns or a --subgroup column, or choose --kind individuals", src.name, kind)
	}
	return size, nil
}

// groupsOf makes the basis of a computation. A row without a reading is no group, and no moving range reaches across it.
func groupsOf(src *source) (groups []limits.Group, rowOf []int, err error) {
	t := src.table
	var readings []decimal.Reading
	gap := false
	for row := range t.Len() {
		reason, excluded := src.excluded[row]
		g := limits.Group{BreakBefore: t.Break(row) || gap, Excluded: excluded, ExclusionReason: reason}
		readings = t.AppendReadings(readings[:0], row)
		if len(readings) == 0 && !excluded {
			gap = true
			continue
		}
		gap = false
		for _, r := range readings {
			switch {
			case r.Bound == decimal.Measured:
				g.Readings, g.Decimals = append(g.Readings, r.Value), max(g.Decimals, r.Places)
			case !excluded:
				return nil, nil, fmt.Errorf("%s: line %d: %s is only a bound, which no estimate can take in; leave the result out with --exclude %d=REASON",
					src.name, t.Line(row), boundText(r), t.Line(row))
			}
		}
		groups, rowOf = append(groups, g), append(rowOf, row)
	}
	return groups, rowOf, nil
}

func boundText(r decimal.Reading) string {
	sign := map[decimal.Bound]string{decimal.Below: "<", decimal.Above: ">"}[r.Bound]
	return fmt.Sprintf("%q", sign+report.Fixed(r.Value, min(r.Places, decimal.PlacesMax)))
}

// answer judges the results by their limits and writes everything.
func (c *computeCall) answer(ctx context.Context, src *source, res limits.Result, groups []limits.Group, rowOf []int, chosen choice) error {
	j, err := judgeOf(res, chosen)
	if err != nil {
		return err
	}
	picture, each := pictureOf(c.plot, j, src)
	outcome, err := judged.Run(ctx, j, src.table, 0, each)
	if err != nil {
		return err
	}
	about := aboutOf(c.env, src, chosen, c.title, c.unit)
	if picture != nil {
		note := fmt.Sprintf("Limits %s from %d results, %d excluded; published with %d decimals.", originWord(res), res.N, len(res.Excluded), res.PublishedDecimals)
		if res.Provisional {
			note = "PROVISIONAL. " + note
		}
		if err := drawPicture(c.plot, picture, about, src, note); err != nil {
			return err
		}
	}
	if c.json {
		tellNotes(c.env, about)
		answer := service.ComputedToProto(res)
		for _, e := range answer.Exclusions {
			e.Point = int32(rowOf[e.Point])
		}
		return writeJSON(c.env.Stdout, answer)
	}
	used := make([]float64, 0, res.Readings)
	for _, g := range groups {
		if !g.Excluded {
			used = append(used, g.Readings...)
		}
	}
	return report.Limits(c.env.Stdout, report.Computed{About: about, Result: res, Readings: used, RowOf: rowOf, Outcome: outcome})
}

func originWord(res limits.Result) string {
	if res.Origin == limits.Target {
		return "given, compared with what follows"
	}
	return res.Origin.String()
}
