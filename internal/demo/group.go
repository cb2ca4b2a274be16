package demo

import (
	"time"

	"google.golang.org/protobuf/types/known/durationpb"

	pb "limitary/api/limitary/v1"
)

const (
	// groupLabel and groupName mark every chart of the demo.
	groupLabel = "group"
	groupName  = "fellmark-water"
)

// chartOf makes a chart of the group. Zone and labels are those of its laboratory.
func chartOf(site, name, title string, kind pb.ChartKind, size int32, unit, method, instrument, analyte string, due time.Duration) *pb.Chart {
	return &pb.Chart{
		Name: name, Title: title, Kind: kind, SubgroupSize: size, Unit: unit,
		Labels:      map[string]string{groupLabel: groupName, "site": site, "method": method, "instrument": instrument, "analyte": analyte},
		DisplayZone: "Europe/London", PlanInterval: durationpb.New(due), LongestGap: durationpb.New(4 * due),
		RepeatRule: "After a STOP the control is repeated once in the same run. The repeat is plotted and never replaces the first result.",
	}
}

const (
	individuals = pb.ChartKind_CHART_KIND_INDIVIDUALS
	xbarR       = pb.ChartKind_CHART_KIND_XBAR_R
	xbarS       = pb.ChartKind_CHART_KIND_XBAR_S
	runMeans    = pb.ChartKind_CHART_KIND_RUN_MEANS
	pairs       = pb.ChartKind_CHART_KIND_DUPLICATE_RANGE
	fraction    = pb.ChartKind_CHART_KIND_P
	counts      = pb.ChartKind_CHART_KIND_C

	look = pb.Consequence_CONSEQUENCE_LOOK
	act  = pb.Consequence_CONSEQUENCE_ACT
	stop = pb.Consequence_CONSEQUENCE_STOP
)

// houseRules are the laboratories' own words for each consequence.
func houseRules() *pb.Instructions {
	return &pb.Instructions{
		Look: "Look at the chart before the next run and note what was unusual.",
		Act:  "Report the run. Tell the section head today and find the cause within two working days.",
		Stop: "Do not report the run. Repeat the control once, tell the section head, and wait for the track to be released.",
	}
}

func setOf(id string) *pb.TraceRules           { return &pb.TraceRules{RuleSet: id} }
func own(specs ...*pb.RuleSpec) *pb.TraceRules { return &pb.TraceRules{Rules: specs} }

func beyond(id string, c pb.Consequence, k, m int32, z float64) *pb.RuleSpec {
	return &pb.RuleSpec{Id: id, Consequence: c, Rule: &pb.RuleSpec_Beyond_{Beyond: &pb.RuleSpec_Beyond{K: k, M: m, Z: z}}}
}

func sameSide(id string, c pb.Consequence, n int32) *pb.RuleSpec {
	return &pb.RuleSpec{Id: id, Consequence: c, Rule: &pb.RuleSpec_SameSide_{SameSide: &pb.RuleSpec_SameSide{N: n}}}
}

func trend(id string, c pb.Consequence, n int32) *pb.RuleSpec {
	return &pb.RuleSpec{Id: id, Consequence: c, Rule: &pb.RuleSpec_Trend_{Trend: &pb.RuleSpec_Trend{N: n}}}
}

func ewma(id string, c pb.Consequence, lambda, limit float64) *pb.RuleSpec {
	return &pb.RuleSpec{Id: id, Consequence: c, Rule: &pb.RuleSpec_Ewma_{Ewma: &pb.RuleSpec_Ewma{Lambda: lambda, Limit: limit}}}
}

func aboveLine(id string, c pb.Consequence, line pb.LineKind) *pb.RuleSpec {
	return &pb.RuleSpec{Id: id, Consequence: c, Sides: pb.Sides_SIDES_UPPER,
		Rule: &pb.RuleSpec_BeyondLine_{BeyondLine: &pb.RuleSpec_BeyondLine{Line: line}}}
}

// nelsonForMonitoring are the tests of the set that suit monitoring, with consequences of the laboratories' own.
func nelsonForMonitoring() *pb.TraceRules {
	return own(
		beyond("nelson-1984/1", stop, 1, 1, 3),
		sameSide("nelson-1984/2", act, 9),
		trend("nelson-1984/3", look, 6),
		beyond("nelson-1984/5", act, 2, 3, 2),
		beyond("nelson-1984/6", act, 4, 5, 1),
	)
}

// movingRange watches the scatter between neighbours; a single large range asks for a look only, as the value behind it
// is judged by itself.
func movingRange() *pb.TraceRules { return own(beyond("moving-range", look, 1, 1, 3)) }

func fixedLine(value float64, basis pb.Basis) *pb.Line { return &pb.Line{Value: &value, Basis: basis} }

// exactLines are at the whole counts that the tails of the law of counts give.
func exactLines() *pb.KindOptions {
	return &pb.KindOptions{CountMethod: pb.CountMethod_COUNT_METHOD_EXACT}
}

func absent() *pb.Line { return &pb.Line{Basis: pb.Basis_BASIS_ABSENT} }

func ptr[T any](v T) *T { return &v }

// Decisions of the reviewer, from the group's own list.
const (
	assignableCause = "ASSIGNABLE_CAUSE"
	noCause         = "NO_CAUSE_FOUND"
)

const (
	chance  = "No cause found; the runs before and after are in order. Taken as chance."
	week    = 7 * day
	day     = 24 * time.Hour
	halfDay = 12 * time.Hour
)

// Labels are what every chart of the demo has, and no other chart should.
func Labels() map[string]string { return map[string]string{groupLabel: groupName} }
