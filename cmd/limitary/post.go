package main

import (
	"context"
	"fmt"
	"strconv"
	"text/tabwriter"

	"google.golang.org/grpc"

	pb "limitary/api/limitary/v1"
	"limitary/internal/decimal"
)

const postAbout = `Posts the results of a delimited text file to a chart, in batches. A result is known by chart, source and the id in
its row, so that posting the same file again stores nothing twice. FILE may be "-" for standard input.

Results of a chart of counts have their count in the --value column, and --inspected says of how much: a column, or a
number that holds for every row, 1 for a c chart.

A table of outcomes is printed; it exits with 1 where a row was refused or stands against what is stored.`

// postFlags say what the rows of a file are.
type postFlags struct {
	client                              clientFlags
	source                              sourceFlags
	chart, from, lot, run, material     string
	analyst, instrument, unit           string
	batch                               int
	allOrNothing, onlyTrouble, setUpRun bool
}

func (p *postFlags) add(f *flagSet) {
	p.client.add(f)
	p.source.materialFlag = "material-column"
	p.source.register(f, false)
	f.StringVar(&p.chart, "chart", "", "`NAME` of the chart; required")
	f.StringVar(&p.from, "source", "", "`SOURCE`: the system the results come from; required")
	f.StringVar(&p.lot, "lot", "", "`LOT` of control material")
	f.StringVar(&p.run, "run", "", "`ID` of the analytical run")
	f.StringVar(&p.material, "material", "", "control `MATERIAL` of every row; --material-column where rows differ")
	f.StringVar(&p.analyst, "analyst", "", "`NAME` of the analyst")
	f.StringVar(&p.instrument, "instrument", "", "`NAME` of the instrument")
	f.StringVar(&p.unit, "unit", "", "`UNIT` of the readings, refused where it is not the chart's (default: the chart's)")
	f.BoolVar(&p.setUpRun, "set-up", false, "the results were measured to set the chart up")
	f.IntVar(&p.batch, "batch", 1000, "`N` results in one call")
	f.BoolVar(&p.allOrNothing, "all-or-nothing", false, "one bad row refuses its whole batch")
	f.BoolVar(&p.onlyTrouble, "quiet", false, "print only rows that were not accepted, or that are not clear")
}

// batchMax is the service's limit on the rows of one call.
const batchMax = 10_000

func runPost(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "post FILE --chart NAME --source SOURCE --id COLUMN --time COLUMN [flags]", postAbout)
	var p postFlags
	p.add(f)
	rest, code, done := f.parse(args, 1, 1)
	switch {
	case done:
		return code
	case p.chart == "" || p.from == "" || p.source.id == "" || p.source.time == "":
		return f.wrong("--chart, --source, --id and --time are required: a result is known by chart, source and id, and has its place by its time")
	case p.material != "" && p.source.material != "":
		return f.wrong("--material and --material-column both say the material; leave one of the two out")
	case p.source.mark != "":
		return f.wrong("--break is for computing and judging; breaks of a stored track are marks")
	case p.batch < 1 || p.batch > batchMax:
		return f.wrong("--batch %d: want 1 to %d", p.batch, batchMax)
	}
	src, err := p.source.read(ctx, env, rest[0])
	if err != nil {
		if usage, ok := err.(usageError); ok {
			return f.wrong("%v", usage)
		}
		return fail(env, "%v", err)
	}
	if err := countsOnly(src); err != nil {
		return fail(env, "%v", err)
	}
	conn, err := p.client.dial(env)
	if err != nil {
		return fail(env, "%v", err)
	}
	defer conn.Close()
	return p.post(ctx, env, conn, src)
}

// post sends the rows in batches and prints what became of them.
func (p *postFlags) post(ctx context.Context, env *environment, conn *grpc.ClientConn, src *source) int {
	t := src.table
	all := &pb.PostResultsResponse{}
	w := tabwriter.NewWriter(env.Stdout, 0, 8, 2, ' ', 0)
	if !p.client.json {
		fmt.Fprintln(w, "LINE\tID\tOUTCOME\tSTANDING\tVERSION\tTRACK\tWHY")
	}
	tally := map[pb.PostOutcome]int{}
	client := pb.NewEvaluationServiceClient(conn)
	for start := 0; start < t.Len(); start += p.batch {
		end := min(start+p.batch, t.Len())
		in := &pb.PostResultsRequest{AllOrNothing: p.allOrNothing}
		for i := start; i < end; i++ {
			in.Results = append(in.Results, p.result(src, i))
		}
		out, err := client.PostResults(ctx, in)
		if err != nil {
			_ = w.Flush()
			callFailed(env, err)
			return fail(env, "%d of %d rows were answered before; posting the file again is safe", start, t.Len())
		}
		all.Results, all.Tracks = append(all.Results, out.Results...), append(all.Tracks, out.Tracks...)
		for i, r := range out.Results {
			tally[r.Outcome]++
			if !p.client.json && !(p.onlyTrouble && isCalm(r)) {
				printPosted(w, t.Line(start+i), r)
			}
		}
		if env.Interactive {
			fmt.Fprintf(env.Stderr, "\r%d of %d posted", end, t.Len())
		}
	}
	if env.Interactive {
		fmt.Fprintln(env.Stderr)
	}
	code := flush(env, w)
	if p.client.json {
		code = printJSON(env, all)
	}
	return max(code, tallied(env, tally))
}

// result makes row i the result to post.
func (p *postFlags) result(src *source, i int) *pb.Result {
	row := src.table.Row(i)
	r := &pb.Result{
		Chart: p.chart, Source: p.from, SourceId: row.ID, MeasuredAt: row.Time, Lot: p.lot, RunId: p.run,
		Material: p.material, Analyst: p.analyst, Instrument: p.instrument, Unit: p.unit,
	}
	if p.setUpRun {
		r.Role = pb.ResultRole_RESULT_ROLE_SETUP
	}
	if row.Material != "" {
		r.Material = row.Material
	}
	if r.Count = countAt(src, i); r.Count != nil {
		return r
	}
	for _, reading := range row.Readings {
		r.Readings = append(r.Readings, readingText(reading))
	}
	return r
}

// countAt gives the count of row i where --inspected says that the file holds counts; nil where it does not, or the row
// has none.
func countAt(src *source, i int) *pb.Count {
	figures := src.table.Figures(i)
	inspected, own := src.table.Inspected(i)
	if !own {
		inspected = src.inspected
	}
	if inspected == 0 || len(figures) != 1 {
		return nil
	}
	return &pb.Count{Nonconforming: figures[0], Inspected: inspected}
}

// countsOnly refuses a bound, or several values in a row, where --inspected says that the file holds counts.
func countsOnly(src *source) error {
	if src.inspected == 0 && !src.table.HasInspected() {
		return nil
	}
	for i := range src.table.Len() {
		row := src.table.Row(i)
		switch {
		case len(row.Readings) > 1:
			return fmt.Errorf("%s: line %d: the result has %d values, and --inspected goes with one count a row", src.name, row.Line, len(row.Readings))
		case len(row.Readings) == 1 && row.Readings[0].Bound != decimal.Measured:
			return fmt.Errorf("%s: line %d: the count is only a bound, and a count is known", src.name, row.Line)
		}
	}
	return nil
}

// readingText writes a reading as it was measured: with its decimals and, where it is one, as a bound.
func readingText(r decimal.Reading) string {
	text := strconv.FormatFloat(r.Value, 'f', r.Places, 64)
	switch r.Bound {
	case decimal.Below:
		return "<" + text
	case decimal.Above:
		return ">" + text
	}
	return text
}

// isCalm tells a row that needs nobody's attention.
func isCalm(r *pb.PostedResult) bool {
	stored := r.Outcome == pb.PostOutcome_POST_OUTCOME_ACCEPTED || r.Outcome == pb.PostOutcome_POST_OUTCOME_DUPLICATE
	return stored && currentVerdict(r).GetStanding() == pb.Standing_STANDING_CLEAR
}

func currentVerdict(r *pb.PostedResult) *pb.ResultVerdict {
	if r.CurrentVerdict != nil {
		return r.CurrentVerdict
	}
	return r.Verdict
}

func printPosted(w *tabwriter.Writer, line int, r *pb.PostedResult) {
	v := currentVerdict(r)
	standing, version, track, why := "-", "-", "-", r.Message
	if v != nil {
		standing, version = enumWord(v.Standing.String(), "STANDING_"), versionName(v.Version)
		if why == "" {
			why = rulesOf(v)
		}
	}
	if r.TrackState != pb.TrackState_TRACK_STATE_UNSPECIFIED {
		track = enumWord(r.TrackState.String(), "TRACK_STATE_")
	}
	fmt.Fprintf(w, "%d\t%s\t%s\t%s\t%s\t%s\t%s\n", line, r.SourceId, enumWord(r.Outcome.String(), "POST_OUTCOME_"), standing, version, track, dash(why))
}

// rulesOf names the rules that completed, or why there was no judging.
func rulesOf(v *pb.ResultVerdict) string {
	if v.Reason != pb.NotJudgedReason_NOT_JUDGED_REASON_UNSPECIFIED {
		return enumWord(v.Reason.String(), "NOT_JUDGED_REASON_")
	}
	text := ""
	for _, h := range v.Hits {
		if text != "" {
			text += ", "
		}
		text += h.Rule
	}
	return text
}

// tallied says how many rows came to what; it fails where one was not stored as it is.
func tallied(env *environment, tally map[pb.PostOutcome]int) int {
	code := exitOK
	for _, o := range []pb.PostOutcome{
		pb.PostOutcome_POST_OUTCOME_ACCEPTED, pb.PostOutcome_POST_OUTCOME_DUPLICATE, pb.PostOutcome_POST_OUTCOME_CONFLICT,
		pb.PostOutcome_POST_OUTCOME_REFUSED, pb.PostOutcome_POST_OUTCOME_NOT_STORED,
	} {
		if n := tally[o]; n > 0 {
			fmt.Fprintf(env.Stderr, "%d %s\n", n, enumWord(o.String(), "POST_OUTCOME_"))
			if o != pb.PostOutcome_POST_OUTCOME_ACCEPTED && o != pb.PostOutcome_POST_OUTCOME_DUPLICATE {
				code = exitFailure
			}
		}
	}
	return code
}
