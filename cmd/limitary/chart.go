package main

import (
	"context"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"
	"time"

	"google.golang.org/protobuf/types/known/durationpb"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
)

const chartAbout = `Works on the charts of a running service.

  limitary chart create NAME --kind KIND --unit UNIT [flags]
  limitary chart list [flags]
  limitary chart show NAME [flags]`

func runChart(ctx context.Context, env *environment, args []string) int {
	subcommands := map[string]func(context.Context, *environment, []string) int{"create": chartCreate, "list": chartList, "show": chartShow}
	return dispatch(ctx, env, "chart", chartAbout, subcommands, args)
}

func chartCreate(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "chart create NAME --kind KIND --unit UNIT [flags]", "Defines a chart. Kind, size, unit and tracks never change afterwards. Needs the role author.")
	var client clientFlags
	client.add(f)
	requestID := requestIDFlag(f)
	kind := f.String("kind", "", "`KIND`: "+chart.KindNames()+"; required")
	size := f.Int("size", 1, "`N` readings in a full subgroup, or items in every sample of an np chart")
	unit := f.String("unit", "", "`UNIT` of every reading, \"1\" where there is none; required")
	name := f.String("name", "", "`NAME` of the chart, where it is not given as the argument")
	title := f.String("title", "", "`TEXT` for people")
	decimals := f.Int("decimals", -1, "`N` published decimals of later versions (default: chosen from their data)")
	var labels labelMap
	f.Var(&labels, "label", "`KEY=VALUE`; may be repeated")
	zone := f.String("zone", "", "IANA time `ZONE` for display (default: UTC)")
	plan := f.Duration("plan", 0, "`INTERVAL` at which a control is due")
	gap := f.Duration("longest-gap", 0, "`INTERVAL` that a moving range of an estimate may bridge at most")
	repeats := f.String("repeat-rule", "", "`TEXT` of the laboratory's rule for repeating a control")
	lots := f.Bool("lots-are-tracks", false, "each lot of control material is a track of its own")
	standardised := f.Bool("standardised", false, "readings are standardised by the level of the material that each result names")
	shift := f.Float64("relevant-shift", 0, "`D` sigmas up to which a difference from the centre in force does not matter (default 0.5)")
	ratio := f.Float64("relevant-ratio", 0, "`Q` up to which a ratio to the sigma in force does not matter, either way (default 1.25)")
	rest, code, done := f.parse(args, 0, 1)
	if done {
		return code
	}
	if (*name == "") == (len(rest) == 0) {
		return f.wrong("one NAME is needed, as the argument or with --name")
	}
	if *name == "" {
		*name = rest[0]
	}
	k, err := parseKind(*kind)
	if err != nil {
		return f.wrong("%v", err)
	}
	c := &pb.Chart{
		Name: *name, Title: *title, Kind: pb.ChartKind(k), SubgroupSize: int32(*size), Unit: *unit, Labels: labels, DisplayZone: *zone,
		PlanInterval: optionalDuration(*plan), LongestGap: optionalDuration(*gap), RepeatRule: *repeats, LotsAreTracks: *lots,
		Standardised: *standardised, RelevantShiftSigmas: *shift, RelevantSigmaRatio: *ratio,
	}
	if *decimals >= 0 {
		d := int32(*decimals)
		c.Decimals = &d
	}
	conn, err := client.dial(env)
	if err != nil {
		return fail(env, "%v", err)
	}
	defer conn.Close()
	out, err := pb.NewChartServiceClient(conn).CreateChart(ctx, &pb.CreateChartRequest{Chart: c, RequestId: requestID()})
	if err != nil {
		return callFailed(env, err)
	}
	if client.json {
		return printJSON(env, out)
	}
	printChart(env.Stdout, out.Chart)
	return exitOK
}

func optionalDuration(d time.Duration) *durationpb.Duration {
	if d == 0 {
		return nil
	}
	return durationpb.New(d)
}

func chartList(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "chart list [flags]", "Lists the charts the key may see.")
	var client clientFlags
	client.add(f)
	var labels labelMap
	f.Var(&labels, "label", "`KEY=VALUE` a chart must have; may be repeated")
	archived := f.Bool("archived", false, "archived charts too")
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	conn, err := client.dial(env)
	if err != nil {
		return fail(env, "%v", err)
	}
	defer conn.Close()
	in := &pb.ListChartsRequest{PageSize: listPage, IncludeArchived: *archived}
	for k, v := range labels {
		in.Labels = append(in.Labels, k+"="+v)
	}
	slices.Sort(in.Labels)
	all := &pb.ListChartsResponse{}
	for {
		out, err := pb.NewChartServiceClient(conn).ListCharts(ctx, in)
		if err != nil {
			return callFailed(env, err)
		}
		all.Charts = append(all.Charts, out.Charts...)
		if in.PageToken = out.NextPageToken; in.PageToken == "" {
			break
		}
	}
	if client.json {
		return printJSON(env, all)
	}
	w := tabwriter.NewWriter(env.Stdout, 0, 8, 2, ' ', 0)
	fmt.Fprintln(w, "NAME\tKIND\tSIZE\tUNIT\tTITLE")
	for _, c := range all.Charts {
		fmt.Fprintf(w, "%s\t%s\t%d\t%s\t%s\n", c.Name, kindName(c.Kind), c.SubgroupSize, c.Unit, c.Title)
	}
	return flush(env, w)
}

func chartShow(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "chart show NAME [flags]", "Shows a chart and its tracks.")
	var client clientFlags
	client.add(f)
	rest, code, done := f.parse(args, 1, 1)
	if done {
		return code
	}
	conn, err := client.dial(env)
	if err != nil {
		return fail(env, "%v", err)
	}
	defer conn.Close()
	out, err := pb.NewChartServiceClient(conn).GetChart(ctx, &pb.GetChartRequest{Name: rest[0]})
	if err != nil {
		return callFailed(env, err)
	}
	if client.json {
		return printJSON(env, out)
	}
	printChart(env.Stdout, out.Chart)
	fmt.Fprintln(env.Stdout)
	w := tabwriter.NewWriter(env.Stdout, 0, 8, 2, ' ', 0)
	fmt.Fprintln(w, "LOT\tSTATE\tVERSION\tOPEN SIGNALS\tRESULTS\tLAST MEASURED")
	for _, t := range out.Tracks {
		fmt.Fprintf(w, "%s\t%s\t%s\t%d\t%d\t%s\n", dash(t.Lot), enumWord(t.State.String(), "TRACK_STATE_"), versionName(t.Version), t.OpenSignals, t.Results,
			protoTime(t.LastMeasuredAt))
	}
	return flush(env, w)
}

func printChart(out io.Writer, c *pb.Chart) {
	w := tabwriter.NewWriter(out, 0, 8, 2, ' ', 0)
	row := func(name, format string, args ...any) { fmt.Fprintf(w, name+"\t"+format+"\n", args...) }
	row("chart", "%s", c.Name)
	row("title", "%s", dash(c.Title))
	row("kind", "%s, subgroup size %d", kindName(c.Kind), c.SubgroupSize)
	row("unit", "%s", c.Unit)
	labels := make([]string, 0, len(c.Labels))
	for k, v := range c.Labels {
		labels = append(labels, k+"="+v)
	}
	slices.Sort(labels)
	row("labels", "%s", dash(strings.Join(labels, " ")))
	row("lots are tracks", "%t", c.LotsAreTracks)
	if c.Standardised {
		row("standardised", "by the level of the material that each result names")
	}
	if c.RelevantShiftSigmas > 0 || c.RelevantSigmaRatio > 0 {
		row("does not matter", "a difference up to %s sigmas, a ratio up to %s", relevantText(c.RelevantShiftSigmas), relevantText(c.RelevantSigmaRatio))
	}
	row("revision", "%d", c.Revision)
	if c.Archived {
		row("archived", "yes")
	}
	_ = w.Flush() // a failing writer shows when the command ends
}

// relevantText writes a figure of relevance, 0 being the default.
func relevantText(x float64) string {
	if x == 0 {
		return "(default)"
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}

func kindName(k pb.ChartKind) string {
	return strings.ToLower(enumWord(k.String(), "CHART_KIND_"))
}
