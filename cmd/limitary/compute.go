package main

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
	"limitary/internal/report"
	"limitary/internal/report/judged"
	"limitary/service"
)

const computeAbout = `Computes control limits from a file of control results: the lines and what they rest on, all estimators of sigma side
by side, intervals, what the results say against their limits, and the signals of the same results. FILE is delimited
text with a header line; "-" reads standard input.

A chart of kind individuals takes one reading a row. xbar_r, xbar_s, run_means, duplicate_range and relative_range take
subgroups: several --value columns, or one and a --subgroup column. p, np, c and u take one count a row, in the --value
column, and --inspected says of how much; c counts in one inspection unit and np in samples of --size. Nothing is stored;
"limitary judge --limits" judges by what --json prints.

With --in-force it also tells whether limits in force should be kept, given these results.

It ends with 0 where limits were computed, whatever the signals, with 1 where the file does not give any, and with 2
where it was called wrongly.`

// computeCall is one call of the command.
type computeCall struct {
	env                                      *environment
	source                                   sourceFlags
	fixed                                    lineFlags
	rules                                    ruleFlags
	kinds                                    kindFlags
	inForce                                  inForceFlags
	kind, estimator, title, unit, plot, file string
	centre, sigma                            numberFlag
	size, decimals                           countFlag
	json                                     bool
}

func runCompute(ctx context.Context, env *environment, args []string) int {
	c := &computeCall{env: env}
	f := newFlags(env, "compute --kind KIND [flags] FILE", computeAbout)
	f.StringVar(&c.kind, "kind", "", "`KIND` of chart: "+chart.KindNames())
	f.Var(&c.size, "size", "`N` readings in a full subgroup, or items in every sample of an np chart; if not given, what the file shows")
	c.source.register(f, true)
	f.StringVar(&c.estimator, "estimator", "", "`NAME` of the estimator of sigma; if not given, the usual one of the kind")
	f.Var(&c.centre, "centre", "`C`: the centre is a target, not estimated")
	f.Var(&c.sigma, "sigma", "`S`: the standard deviation of a single reading is a target, not estimated")
	f.Var(&c.decimals, "decimals", "`D` published decimals; if not given, chosen from the results")
	c.fixed.register(f)
	c.kinds.register(f)
	c.rules.register(f)
	c.inForce.register(f)
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
	basis, err := groupsOf(src, req.Kind, req.SubgroupSize)
	if err != nil {
		return err
	}
	req.Groups = basis.groups
	if err := c.levelsTold(&req, src); err != nil {
		return err
	}
	res, err := limits.Compute(req)
	if err != nil {
		return limitsFault(err, src, basis.rowOf)
	}
	made := computation{request: req, result: res, basis: basis, diagnostics: diagnostics.Examine(req, res, basis.times)}
	if c.inForce.file != "" {
		if made.change, err = c.againstInForce(&req); err != nil {
			return err
		}
	}
	return c.answer(ctx, src, made, rulesChosen)
}

// computation is what was computed and from what.
type computation struct {
	request     limits.Request
	result      limits.Result
	basis       basisOf
	diagnostics diagnostics.Report
	// change is the answer on limits in force, nil where none are given.
	change *pb.ChangeTest
}

// againstInForce answers whether the limits in force should be kept.
func (c *computeCall) againstInForce(req *limits.Request) (*pb.ChangeTest, error) {
	inForce, err := c.inForce.read(req)
	if err != nil {
		return nil, err
	}
	out, err := service.CompareSent(inForce, *req, nil)
	if err != nil {
		return nil, fmt.Errorf("--in-force: %w", err)
	}
	return out, nil
}

// levelsTold refuses levels where nothing says which of them a result is of.
func (c *computeCall) levelsTold(req *limits.Request, src *source) error {
	if len(req.Levels) > 0 && c.source.material == "" {
		return usageError{fmt.Errorf("--level: name the column that tells the levels of %s apart with --material", src.name)}
	}
	return nil
}

// request turns the flags into a request without data.
func (c *computeCall) request() (req limits.Request, chosen choice, err error) {
	if c.kind == "" {
		return req, chosen, fmt.Errorf("--kind is not given; want one of %s", chart.KindNames())
	}
	if req.Kind, err = parseKind(c.kind); err != nil {
		return req, chosen, err
	}
	if c.estimator != "" {
		name := strings.ToUpper(strings.ReplaceAll(c.estimator, "-", "_"))
		if req.Estimator, err = limits.ParseEstimator(name); err != nil || req.Estimator == limits.DefaultEstimator {
			return req, chosen, fmt.Errorf("--estimator %q: %s", c.estimator, estimatorsFor(req.Kind))
		}
	}
	req.Centre, req.Sigma, req.PublishedDecimals = c.centre.value, c.sigma.value, c.decimals.value
	if req.Fixed, err = c.fixed.fixed(); err != nil {
		return req, chosen, err
	}
	if err = c.kinds.apply(&req); err != nil {
		return req, chosen, err
	}
	if err = c.inForce.check(); err != nil {
		return req, chosen, err
	}
	if chosen, err = c.rules.choose(req.Kind); err != nil {
		return req, chosen, err
	}
	if err = chosen.watchSide(c.kinds.oneSided); err != nil {
		return req, chosen, err
	}
	for role := range chart.Roles {
		if err := c.fixed.watched(role, chosen.specs[role]); err != nil {
			return req, chosen, err
		}
	}
	return req, chosen, nil
}

// estimatorsFor tells which estimators a kind has.
func estimatorsFor(kind chart.Kind) string {
	if kind.Counts() {
		return fmt.Sprintf("the sigma of counts follows from their mean, so a chart of kind %s has none", kind)
	}
	return fmt.Sprintf("want one of %v", limits.EstimatorsOf(kind))
}

// answer judges the results by their limits and writes everything.
func (c *computeCall) answer(ctx context.Context, src *source, made computation, chosen choice) error {
	res := made.result
	j, err := judgeOf(res, chosen)
	if err != nil {
		return err
	}
	rows := src.rows(res.Kind, res.SubgroupSize)
	picture, each := pictureOf(c.plot, j, rows)
	outcome, err := judged.Run(ctx, j, rows, 0, each)
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
		return writeJSON(c.env.Stdout, made.message())
	}
	return report.Limits(c.env.Stdout, report.Computed{
		About: about, Result: res, Readings: made.basis.used(), Groups: made.basis.groups, RowOf: made.basis.rowOf, Outcome: outcome,
		Diagnostics: &made.diagnostics, Change: changeOf(made.change, report.Foreign(filepath.Base(c.inForce.file))),
	})
}

// message is the service's own answer, with the rows of the file in place of the groups of the computation.
func (m *computation) message() *pb.ComputeLimitsResponse {
	answer := service.ComputedToProto(m.result, m.diagnostics)
	for _, e := range answer.Exclusions {
		e.Point = int32(m.basis.rowOf[e.Point])
	}
	answer.ChangeTest = m.change
	return answer
}

func originWord(res limits.Result) string {
	if res.Origin == limits.Target {
		return "given, compared with what follows"
	}
	return res.Origin.String()
}
