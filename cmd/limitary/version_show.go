package main

import (
	"fmt"
	"io"
	"strconv"
	"strings"
	"text/tabwriter"

	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/report"
)

type protoMessage = proto.Message

// showVersion prints what an approver reads.
func showVersion(env *environment, v *pb.Version) int {
	w := tabwriter.NewWriter(env.Stdout, 0, 8, 2, ' ', 0)
	row := func(name, format string, args ...any) { fmt.Fprintf(w, name+"\t"+format+"\n", args...) }
	row("version", "%d of %s", v.Number, v.Chart)
	if v.Lot != "" {
		row("lot", "%s", v.Lot)
	}
	state := enumWord(v.State.String(), "VERSION_STATE_")
	if v.InForce {
		state += ", in force"
	}
	row("state", "%s", state)
	row("effective from", "%s", protoTime(v.EffectiveFrom))
	row("author", "%s, %s", v.Author, protoTime(v.ProposeTime))
	row("reason", "%s", v.Reason)
	if v.DecidedBy != "" {
		row("decided by", "%s, %s %s", v.DecidedBy, protoTime(v.DecideTime), v.DecisionReason)
	}
	if v.WithdrawnBy != "" {
		row("withdrawn by", "%s, %s %s", v.WithdrawnBy, protoTime(v.WithdrawTime), v.WithdrawnReason)
	}
	row("basis", "%s", v.Basis)
	provisional := ""
	if v.Provisional {
		provisional = ", provisional"
	}
	row("rests on", "%s%s", restsOnText(v), provisional)
	if v.ProcessSigma > 0 {
		row("process sigma", "%s %s", decimals(v.ProcessSigma, v.PublishedDecimals), sigmaUnit(v))
	}
	row("digest", "%s", v.Digest)
	row("judge number", "%d", v.Judge)
	if code := flush(env, w); code != exitOK {
		return code
	}
	showTrace(env.Stdout, "location", v.Location, v.PublishedDecimals)
	showTrace(env.Stdout, "dispersion", v.Dispersion, v.PublishedDecimals)
	if err := showModel(env.Stdout, v); err != nil {
		return fail(env, "%v", err)
	}
	for _, f := range v.Findings {
		fmt.Fprintf(env.Stdout, "\nfinding %s: %s\n  advice: %s\n  could miss: %s\n", f.Code, f.Text, f.Advice, f.CouldMiss)
	}
	for _, p := range v.PatternsEnded {
		fmt.Fprintf(env.Stdout, "\npattern in progress that it would end: %s\n", p.Text)
	}
	return exitOK
}

// restsOnText counts what the limits rest on.
func restsOnText(v *pb.Version) string {
	if chart.Kind(v.Kind).Counts() {
		return fmt.Sprintf("%d samples", v.N)
	}
	return fmt.Sprintf("%d subgroups, %d readings, estimator %s", v.N, v.Readings, dash(v.Estimator))
}

func decimals(x float64, n int32) string { return strconv.FormatFloat(x, 'f', int(n), 64) }

// inUnit tells a place in the chart's unit, where the trace is judged on another scale.
func inUnit(x *float64) string {
	if x == nil {
		return ""
	}
	return ", " + report.Significant(*x, 5) + " in the unit"
}

func showTrace(out io.Writer, name string, t *pb.TraceLimits, places int32) {
	if t == nil {
		return
	}
	fmt.Fprintf(out, "\n%s trace\n", name)
	w := tabwriter.NewWriter(out, 0, 8, 2, ' ', 0)
	line := func(name string, l *pb.Line, original *float64) {
		if l == nil || l.Value == nil {
			fmt.Fprintf(w, "  %s\tnone\n", name)
			return
		}
		fmt.Fprintf(w, "  %s\t%s\t%s%s\n", name, decimals(l.GetValue(), places), enumWord(l.GetBasis().String(), "BASIS_"), inUnit(original))
	}
	o := t.Original
	if o == nil {
		o = &pb.OriginalScale{}
	}
	line("upper action", t.UpperAction, o.UpperAction)
	line("upper warning", t.UpperWarning, o.UpperWarning)
	if t.Centre != nil {
		fmt.Fprintf(w, "  centre\t%s\t%s\n", decimals(*t.Centre, places), strings.TrimPrefix(inUnit(o.Centre), ", "))
	}
	line("lower warning", t.LowerWarning, o.LowerWarning)
	line("lower action", t.LowerAction, o.LowerAction)
	set := t.RuleSet
	if set == "" && len(t.Rules) > 0 {
		set = "(own)"
	}
	fmt.Fprintf(w, "  rules\t%s\n", dash(set))
	for _, r := range t.Rules {
		fmt.Fprintf(w, "    %s\t%s\n", r.Id, enumWord(r.Consequence.String(), "CONSEQUENCE_"))
	}
	_ = w.Flush() // a failing writer shows when the command ends
}
