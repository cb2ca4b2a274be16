package main

import (
	"context"
	"errors"
	"fmt"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/report"
	"limitary/internal/report/judged"
	"limitary/internal/rules"
	"limitary/service"
)

const judgeAbout = `Judges a file of control results by given limits and rules: every hit with its line, the signals they make, a
summary. FILE is delimited text with a header line; "-" reads standard input.

Limits come from --centre and --sigma, or from a file that "limitary compute --json" wrote. Without --kind each row is
one statistic, plotted as given, and --sigma is its standard deviation. With --kind, --sigma is that of a single reading
and the limits of both traces follow from it; other kinds of chart come from such a file alone. Less-than and
greater-than results ("<0.05") are judged where their bound proves the verdict, else they are not judged.

It ends with 0 also where signals were found; --fail-on makes it end with 3 where a result asks for what is named, or
for worse. It ends with 1 where the file cannot be judged and with 2 where it was called wrongly.`

// exitSignals tells a script that a result asks for what --fail-on names.
const exitSignals = 3

// resultsDetailMax bounds the results answered one by one: the service's own limit.
const resultsDetailMax = service.VerdictsMax

// judgeCall is one call of the command.
type judgeCall struct {
	env                                                                *environment
	source                                                             sourceFlags
	fixed                                                              lineFlags
	rules                                                              ruleFlags
	kind, limits, firstJudged, failOn, detail, title, unit, plot, file string
	oneSided                                                           string
	centre, sigma                                                      numberFlag
	size, decimals                                                     countFlag
	json                                                               bool
}

func runJudge(ctx context.Context, env *environment, args []string) int {
	c := &judgeCall{env: env}
	f := newFlags(env, "judge --centre C --sigma S [--rules SET] [flags] FILE", judgeAbout)
	f.Var(&c.centre, "centre", "`C`: the centre line of the location trace")
	f.Var(&c.sigma, "sigma", "`S`: the standard deviation of the statistic, or with --kind that of a single reading")
	f.StringVar(&c.limits, "limits", "", "`FILE` that compute --json wrote, instead of --centre, --sigma, --kind and the like")
	f.StringVar(&c.kind, "kind", "", "`KIND` of chart: "+givenKinds()+"; if not given, statistics are plotted as given")
	f.Var(&c.size, "size", "`N` readings in a full subgroup; if not given, the most that a result of the file has")
	f.Var(&c.decimals, "decimals", "`D` decimals that statistics and lines are rounded to before they are compared; if not given, nothing is rounded")
	c.source.register(f, false)
	c.fixed.register(f)
	c.rules.register(f)
	f.StringVar(&c.oneSided, "one-sided", "", "`SIDE` of the location trace that alone is watched, as compute was told: upper or lower")
	f.StringVar(&c.firstJudged, "first-judged", "", "`LINE` of the first result that is reported; those before it only count towards patterns")
	f.StringVar(&c.failOn, "fail-on", "", "end with exit code 3 where a result has at least this `STANDING`: look, act or stop")
	f.StringVar(&c.detail, "detail", "", "`LEVEL` full adds one verdict for each result")
	registerOutput(f, &c.title, &c.unit, &c.plot, &c.json)
	rest, code, done := f.parse(args, 1, 1)
	if done {
		return code
	}
	c.file = rest[0]
	worst, err := c.run(ctx)
	if err != nil {
		return finish(env, "judge", err)
	}
	if least, asked := failStandings[c.failOn]; asked && worst >= least {
		return exitSignals
	}
	return exitOK
}

var failStandings = map[string]judge.Standing{"look": judge.LookAt, "act": judge.ActOn, "stop": judge.StopAt}

// checkFlags refuses what is wrong whatever the file holds.
func (c *judgeCall) checkFlags() error {
	if _, ok := failStandings[c.failOn]; !ok && c.failOn != "" {
		return fmt.Errorf("--fail-on %q: want look, act or stop", c.failOn)
	}
	if c.detail != "" && c.detail != "full" {
		return fmt.Errorf("--detail %q: want full", c.detail)
	}
	if c.limits != "" {
		for flag, given := range map[string]bool{"centre": c.centre.value != nil, "sigma": c.sigma.value != nil, "kind": c.kind != "",
			"size": c.size.value != nil, "decimals": c.decimals.value != nil} {
			if given {
				return fmt.Errorf("--%s: is given beside --limits, which says it already; leave one of the two out", flag)
			}
		}
	}
	return checkPlotPath(c.plot, c.file)
}

func (c *judgeCall) run(ctx context.Context) (judge.Standing, error) {
	l, from, err := c.startLimits()
	if err != nil {
		return 0, err
	}
	chosen, err := c.rules.choose(l.Kind)
	if err != nil {
		return 0, usageError{err}
	}
	if err := chosen.watchSide(c.oneSided); err != nil {
		return 0, usageError{err}
	}
	src, err := c.source.read(ctx, c.env, c.file)
	if err != nil {
		return 0, err
	}
	if len(l.Model.Levels) > 0 && c.source.material == "" {
		return 0, usageError{errors.New("--material: the limits standardise results by their material; name its column")}
	}
	asked := c.size.value
	if c.limits != "" {
		asked = &l.SubgroupSize
	}
	if l.Kind == chart.Given {
		asked = nil
	}
	size, err := sizeFor(l.Kind, asked, src)
	if err != nil {
		return 0, err
	}
	if l.Kind != chart.Given {
		l.SubgroupSize = size
	}
	if c.limits == "" {
		c.traces(&l)
	}
	if err := c.place(&l, chosen); err != nil {
		return 0, usageError{err}
	}
	j, err := judge.New(l)
	if err != nil {
		return 0, judgeFault(err)
	}
	first := 0
	if c.firstJudged != "" {
		if first, err = src.rowAt("--first-judged", c.firstJudged); err != nil {
			return 0, err
		}
	}
	return c.answer(ctx, src, j, first, from, chosen)
}

// judgeFault tells a refusal of the judge in the words of the command line.
func judgeFault(err error) error {
	var e *judge.Error
	if !errors.As(err, &e) {
		return err
	}
	return usageError{fmt.Errorf("%s: %s", e.Field, e.Problem)}
}

// answer judges and writes everything.
func (c *judgeCall) answer(ctx context.Context, src *source, j *judge.Judge, first int, from string, chosen choice) (judge.Standing, error) {
	if n := src.table.Len() - first; c.detail == "full" && n > resultsDetailMax {
		return 0, usageError{fmt.Errorf("--detail full: %d results, the limit is %d; leave it out, or begin later with --first-judged", n, resultsDetailMax)}
	}
	rows := src.rows(j.Limits().Kind, j.Limits().SubgroupSize)
	picture, each := pictureOf(c.plot, j, rows)
	var verdicts *report.Verdicts
	if c.detail == "full" && !c.json {
		verdicts = report.NewVerdicts(j, rows, first)
		draw := each
		each = func(row int, v *judge.Verdict) {
			verdicts.Take(row, v)
			if draw != nil {
				draw(row, v)
			}
		}
	}
	outcome, err := judged.Run(ctx, j, rows, first, each)
	if err != nil {
		return 0, err
	}
	about := aboutOf(c.env, src, chosen, c.title, c.unit)
	if picture != nil {
		if err := drawPicture(c.plot, picture, about, src, "Limits "+from+"."); err != nil {
			return 0, err
		}
	}
	if c.json {
		tellNotes(c.env, about)
		return outcome.Worst(), writeJSON(c.env.Stdout, c.message(rows, j, first))
	}
	return outcome.Worst(), report.Judged(c.env.Stdout, report.Judgement{About: about, Outcome: outcome, LimitsFrom: from, Verdicts: verdicts})
}

// message answers as the service does.
func (c *judgeCall) message(rows *judged.Rows, j *judge.Judge, first int) *pb.EvaluateBatchResponse {
	result := service.EvaluatePoints(j, rows.Table.Len(), first, c.detail == "full", rows.Point)
	return &pb.EvaluateBatchResponse{Evaluations: []*pb.EvaluationResult{result}, Judge: rules.JudgeNumber}
}
