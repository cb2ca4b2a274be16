package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/rules"
	"limitary/internal/runlength/effort"
	"limitary/service"
)

const runLengthAbout = `Tells what rules cost and what they catch: the run length, the number of points to the first signal, in control
and after a shift of the mean; how many points are flagged and signals opened in the long run; and on request what each
rule adds (--marginal), which subset of the rules keeps to a budget of false alarms (--budget), and what limits estimated
from few points will really do (--limits-from). Nothing is read from a database and nothing is stored.

Every figure names its computation and bounds its error. Only rules of the consequence --ends or worse end a run: the
set-up patterns of nelson-1984 only ask for a look, and count with --ends look.

--request FILE takes the service's own JSON request instead of flags, with rules of your own; "-" reads standard input.`

// runLengthCall is one call of the command.
type runLengthCall struct {
	env   *environment
	rules ruleFlags
	in    pb.RunLengthRequest
	kind  string
	shifts, horizons, quantiles,
	unit, ends, start string
	ratio                    numberFlag
	freedom, gamma           float64
	step, correlation        float64
	budget, matters, perDay  float64
	basis, power, tracks     int
	size, runs               int
	seed                     uint
	estimator, request, plot string
	json                     bool
}

func runRunLength(ctx context.Context, env *environment, args []string) int {
	c := &runLengthCall{env: env}
	f := newFlags(env, "run-length [flags]", runLengthAbout)
	c.rules.register(f)
	f.StringVar(&c.kind, "kind", "", "`KIND` of a whole chart with both traces: "+kindsThat(plainReadings)+"; if not given, one trace")
	f.IntVar(&c.size, "size", 0, "`N` readings in a subgroup")
	f.StringVar(&c.shifts, "shift", "0,0.5,1,1.5,2,3", "`SHIFTS` of the mean, separated by commas")
	f.StringVar(&c.unit, "shift-unit", "standard-errors", "`UNIT` of shifts: standard-errors (of the plotted statistic) or process-sigmas")
	f.Var(&c.ratio, "sigma-ratio", "`RATIO` of the readings' standard deviation to that of the limits; 1 if not given")
	f.StringVar(&c.horizons, "within", "10,50", "tell the probability of a signal within so many `POINTS`, separated by commas")
	f.StringVar(&c.quantiles, "quantiles", "0.1,0.5,0.9", "tell these quantiles, `P` separated by commas")
	f.StringVar(&c.ends, "ends", "act", "the mildest `CONSEQUENCE` that ends a run: look, act or stop")
	f.StringVar(&c.start, "start", "fresh", "`STATE` at the beginning: fresh (head starts count), segment or steady")
	f.Float64Var(&c.freedom, "t", 0, "points follow Student's t with `DF` degrees of freedom")
	f.Float64Var(&c.gamma, "gamma", 0, "points follow a gamma distribution of `SHAPE`")
	f.Float64Var(&c.step, "round", 0, "points are rounded to this `STEP`, in sigmas")
	f.Float64Var(&c.correlation, "correlation", 0, "`R` of neighbouring points; answered by simulation")
	f.BoolVar(&c.in.MarginalTable, "marginal", false, "tell what each rule adds")
	f.Float64Var(&c.budget, "budget", 0, "rank all subsets of the rules whose ARL in control is at least `POINTS`")
	f.IntVar(&c.basis, "limits-from", 0, "tell what limits estimated from `N` points or subgroups will do")
	f.StringVar(&c.estimator, "estimator", "", "`NAME` of the estimator of sigma, with --limits-from; if not given, the usual one")
	f.Float64Var(&c.matters, "matters", 1, "the `SHIFT` that matters, for --budget and --limits-from")
	f.IntVar(&c.power, "power", 1, "`POINTS` after the shift in which a signal counts as power, with --limits-from")
	f.IntVar(&c.tracks, "tracks", 0, "`N` tracks, with --per-day: tell the expected signals a week")
	f.Float64Var(&c.perDay, "per-day", 0, "`N` points a day on each track")
	f.UintVar(&c.seed, "seed", 1, "`SEED` of simulations")
	f.IntVar(&c.runs, "runs", 0, "`N` runs of a simulation; 100000 if not given")
	f.StringVar(&c.request, "request", "", "take the request as JSON from `FILE`")
	f.StringVar(&c.plot, "plot", "", "draw the distributions to `FILE.svg`")
	f.BoolVar(&c.json, "json", false, "print the service's own JSON instead of the report")
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	return finish(env, "run-length", c.run(ctx))
}

func (c *runLengthCall) run(ctx context.Context) error {
	err := c.build()
	if err == nil && c.plot != "" && !strings.EqualFold(filepath.Ext(c.plot), ".svg") {
		err = fmt.Errorf("--plot %q: the picture is written as SVG; name a file that ends in .svg", c.plot)
	}
	if err != nil {
		return usageError{err}
	}
	progress := &workProgress{env: c.env}
	result, err := service.AnswerRunLength(effort.New(ctx, 0), &c.in, progress.show)
	progress.clear()
	switch {
	case errors.Is(err, context.Canceled):
		return errors.New("interrupted; nothing was computed to the end")
	case err != nil:
		return err
	}
	if c.plot != "" {
		if err := c.draw(result); err != nil {
			return err
		}
	}
	if c.json {
		return writeJSON(c.env.Stdout, result.Message)
	}
	return c.report(result)
}

// build makes the request from a file or from flags.
func (c *runLengthCall) build() error {
	if c.request != "" {
		return c.read()
	}
	in := &c.in
	kind, err := parseKind(c.kind)
	if err != nil {
		return err
	}
	if kind != chart.Given && !plainReadings(kind) {
		return fmt.Errorf("--kind %s: run lengths are those of charts of kind %s; leave it out for one trace of independent normal points", kind, kindsThat(plainReadings))
	}
	chosen, err := c.rules.choose(kind)
	if err != nil {
		return err
	}
	in.Kind = pb.ChartKind(kind)
	in.Location = &pb.RunLengthTrace{Rules: service.RuleSpecs(chosen.specs[chart.Location])}
	if len(chosen.specs[chart.Dispersion]) > 0 {
		in.Dispersion = &pb.RunLengthTrace{Rules: service.RuleSpecs(chosen.specs[chart.Dispersion])}
	}
	for _, note := range chosen.cautions {
		fmt.Fprintln(c.env.Stderr, "limitary: "+note)
	}
	if in.Shifts, err = parseNumbers("shift", c.shifts); err != nil {
		return err
	}
	if in.Quantiles, err = parseNumbers("quantiles", c.quantiles); err != nil {
		return err
	}
	horizons, err := parseNumbers("within", c.horizons)
	if err != nil {
		return err
	}
	for _, h := range horizons {
		if h != float64(int32(h)) {
			return fmt.Errorf("--within %v: want whole numbers of points", h)
		}
		in.HorizonsPoints = append(in.HorizonsPoints, int32(h))
	}
	in.SigmaRatio, in.SubgroupSize, in.SimulationRuns, in.Seed = c.ratio.value, int32(c.size), int32(c.runs), uint32(c.seed)
	in.Rates = true
	return c.options()
}

// words gives the value of an enum by the word for it.
func words[E any](flag, word string, known map[string]E) (E, error) {
	value, ok := known[word]
	if !ok {
		var names []string
		for name := range known {
			names = append(names, name)
		}
		return value, fmt.Errorf("--%s %q: want one of %s", flag, word, strings.Join(sorted(names), ", "))
	}
	return value, nil
}

func (c *runLengthCall) options() (err error) {
	in := &c.in
	if in.ShiftUnit, err = words("shift-unit", c.unit, map[string]pb.ShiftUnit{
		"standard-errors": pb.ShiftUnit_SHIFT_UNIT_STANDARD_ERRORS, "process-sigmas": pb.ShiftUnit_SHIFT_UNIT_PROCESS_SIGMAS}); err != nil {
		return err
	}
	if in.Consequence, err = words("ends", c.ends, map[string]pb.Consequence{
		"look": pb.Consequence_CONSEQUENCE_LOOK, "act": pb.Consequence_CONSEQUENCE_ACT, "stop": pb.Consequence_CONSEQUENCE_STOP}); err != nil {
		return err
	}
	if in.Start, err = words("start", c.start, map[string]pb.RunStart{
		"fresh": pb.RunStart_RUN_START_FRESH, "segment": pb.RunStart_RUN_START_SEGMENT, "steady": pb.RunStart_RUN_START_STEADY_STATE}); err != nil {
		return err
	}
	data := &pb.RunLengthData{RoundingStep: c.step, Correlation: c.correlation}
	switch {
	case c.freedom != 0 && c.gamma != 0:
		return fmt.Errorf("--t and --gamma: points have one distribution; give one of the two")
	case c.freedom != 0:
		data.Shape, data.DegreesOfFreedom = pb.DataShape_DATA_SHAPE_STUDENT, c.freedom
	case c.gamma != 0:
		data.Shape, data.GammaShape = pb.DataShape_DATA_SHAPE_GAMMA, c.gamma
	}
	in.Data = data
	return c.studies()
}

// studies adds what is asked for beside the run lengths.
func (c *runLengthCall) studies() error {
	in := &c.in
	estimator := limits.DefaultEstimator
	if c.estimator != "" {
		var err error
		if estimator, err = limits.ParseEstimator(strings.ToUpper(strings.ReplaceAll(c.estimator, "-", "_"))); err != nil {
			return fmt.Errorf("--estimator %q: want one of %v", c.estimator, limits.EstimatorsOf(chart.Kind(max(in.Kind, pb.ChartKind_CHART_KIND_INDIVIDUALS))))
		}
	}
	if c.budget != 0 {
		in.Choice = &pb.RuleChoiceRequest{InControlArlMin: c.budget, Shift: c.matters, BasisPoints: int32(c.basis), Estimator: service.EstimatorValue(estimator)}
	}
	if c.basis != 0 {
		in.RealLimits = &pb.RealLimitsRequest{BasisPoints: int32(c.basis), Shift: c.matters, PowerPoints: int32(c.power), Estimator: service.EstimatorValue(estimator)}
	}
	if (c.tracks != 0) != (c.perDay != 0) {
		return fmt.Errorf("--tracks and --per-day: a workload needs both")
	}
	if c.tracks != 0 {
		in.Workload = &pb.WorkloadRequest{Tracks: int32(c.tracks), PointsPerDay: c.perDay}
	}
	return nil
}

// requestBytesMax bounds a request file; the largest possible request is far smaller.
const requestBytesMax = 1 << 20

// read takes the request from a file.
func (c *runLengthCall) read() error {
	from := c.env.Stdin
	if c.request != "-" {
		file, err := os.Open(c.request)
		if err != nil {
			return fmt.Errorf("--request: %w", err)
		}
		defer file.Close()
		from = file
	}
	raw, err := io.ReadAll(io.LimitReader(from, requestBytesMax+1))
	if err != nil {
		return fmt.Errorf("--request %s: %w", c.request, err)
	}
	if len(raw) > requestBytesMax {
		return fmt.Errorf("--request %s: more than %d bytes, which is the limit", c.request, requestBytesMax)
	}
	if err := protojson.Unmarshal(raw, &c.in); err != nil {
		return fmt.Errorf("--request %s: %v", c.request, err)
	}
	return nil
}

// parseNumbers reads numbers separated by commas.
func parseNumbers(flag, text string) (list []float64, err error) {
	for _, part := range strings.Split(text, ",") {
		if strings.TrimSpace(part) == "" {
			continue
		}
		x, err := strconv.ParseFloat(strings.TrimSpace(part), 64)
		if err != nil || x-x != 0 {
			return nil, fmt.Errorf("--%s %q: %q is not a finite number; want numbers with a decimal point, separated by commas", flag, text, part)
		}
		list = append(list, x)
	}
	return list, nil
}

// workProgress shows how far long work has come, where a person is watching.
type workProgress struct {
	env  *environment
	last string
}

func (p *workProgress) show(what string, done, of int) {
	if !p.env.Interactive {
		return
	}
	text := fmt.Sprintf("%s: %d %%", what, 100*done/of)
	if text == p.last {
		return
	}
	fmt.Fprintf(p.env.Stderr, "\r%-*s", len(p.last), text)
	p.last = text
}

func (p *workProgress) clear() {
	if p.last != "" {
		fmt.Fprintf(p.env.Stderr, "\r%s\r", strings.Repeat(" ", len(p.last)))
	}
}

// judgeNumber is said of every report.
const judgeNumber = rules.JudgeNumber
