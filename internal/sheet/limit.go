package sheet

import (
	"context"
	"sort"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/grid"
)

// limit answers with one number of a version.
func (h *Handler) limit(r *request) (*answer, error) {
	name := r.args[1]
	number, err := r.version()
	if err != nil {
		return nil, err
	}
	decimal, err := r.decimal()
	if err != nil {
		return nil, err
	}
	if names[name] == nil {
		return nil, unknownName(name)
	}
	v, err := h.version(r.ctx(), r.chart(), r.query.Get("lot"), number)
	if err != nil {
		return nil, err
	}
	value, err := r.valueOf(v, name)
	if err != nil {
		return nil, err
	}
	a := textAnswer(cellText(value, decimal))
	a.pinned = number != 0
	return a, nil
}

func unknownName(name string) error {
	return refuse("%s: is no number of a version; there are %s", clip(name), strings.Join(Names(), ", "))
}

// cellText writes a value as a cell takes it.
func cellText(v grid.Value, decimal byte) string {
	switch v.Kind {
	case grid.Number:
		return grid.WithDecimal(v.Text, decimal)
	case grid.Time:
		return v.Time.Format("2006-01-02T15:04:05Z")
	}
	return v.Text
}

// version reads a version: one by number, if it was ever approved, or the one in force. Finding the latter asks whether the
// key may see the chart, with the least work there is, so that what never changes may then come from memory.
func (h *Handler) version(ctx context.Context, chart, lot string, number int32) (*pb.Version, error) {
	if number != 0 && h.approved.get(chart, number) == nil {
		return h.read(ctx, chart, lot, number)
	}
	found, err := h.inForce(ctx, chart, lot)
	switch {
	case number != 0 && (err == nil || reasonOf(err) == "NO_VERSION_IN_FORCE"):
		return h.seen(ctx, chart, lot, number)
	case err != nil:
		return nil, err
	}
	return h.seen(ctx, chart, lot, found)
}

// seen gives a version of a chart that the key has just been found to see.
func (h *Handler) seen(ctx context.Context, chart, lot string, number int32) (*pb.Version, error) {
	if v := h.approved.get(chart, number); v != nil {
		return v, forLot(v, lot)
	}
	return h.read(ctx, chart, lot, number)
}

func (h *Handler) read(ctx context.Context, chart, lot string, number int32) (*pb.Version, error) {
	got, err := h.limits.GetVersion(ctx, &pb.GetVersionRequest{Chart: chart, Version: number})
	if err != nil {
		return nil, err
	}
	v := got.Version
	if s := v.State; s != pb.VersionState_VERSION_STATE_APPROVED && s != pb.VersionState_VERSION_STATE_WITHDRAWN {
		return nil, refuse("version %d of chart %q is %s, not approved", number, chart, word(s.String(), "VERSION_STATE_"))
	}
	h.approved.put(v)
	return v, forLot(v, lot)
}

// forLot refuses a version of another lot.
func forLot(v *pb.Version, lot string) error {
	if lot != "" && v.Lot != "" && v.Lot != lot {
		return refuse("version %d of chart %q is for lot %q, not %q", v.Number, v.Chart, v.Lot, clip(lot))
	}
	return nil
}

// inForce finds the number of the version in force, which an evaluation of no points names.
func (h *Handler) inForce(ctx context.Context, chart, lot string) (int32, error) {
	got, err := h.evaluate(ctx, evaluation(&pb.ByChart{Name: chart, Lot: lot}, nil))
	if err != nil {
		return 0, err
	}
	return got[0].Version, nil
}

// word takes the prefix off the name of an enum value.
func word(name, prefix string) string { return strings.TrimPrefix(name, prefix) }

// names are the numbers and texts of a version that a cell can ask for. None of them changes once a version is approved.
var names = map[string]func(*pb.Version) grid.Value{
	"version":        func(v *pb.Version) grid.Value { return grid.Int(v.Number) },
	"n":              func(v *pb.Version) grid.Value { return grid.Int(v.N) },
	"readings":       func(v *pb.Version) grid.Value { return grid.Int(v.Readings) },
	"subgroup_size":  func(v *pb.Version) grid.Value { return grid.Int(v.SubgroupSize) },
	"decimals":       func(v *pb.Version) grid.Value { return grid.Int(v.PublishedDecimals) },
	"process_sigma":  func(v *pb.Version) grid.Value { return grid.Float(v.ProcessSigma) },
	"unit":           func(v *pb.Version) grid.Value { return grid.Of(v.Unit) },
	"kind":           func(v *pb.Version) grid.Value { return grid.Of(word(v.Kind.String(), "CHART_KIND_")) },
	"estimator":      func(v *pb.Version) grid.Value { return grid.Of(v.Estimator) },
	"provisional":    func(v *pb.Version) grid.Value { return grid.Yes(v.Provisional) },
	"effective_from": func(v *pb.Version) grid.Value { return grid.Moment(v.EffectiveFrom.AsTime()) },
	"judge":          func(v *pb.Version) grid.Value { return grid.Int(v.Judge) },
	"digest":         func(v *pb.Version) grid.Value { return grid.Of(v.Digest) },
	"author":         func(v *pb.Version) grid.Value { return grid.Of(v.Author) },
	"rules":          func(v *pb.Version) grid.Value { return rulesOf(v.Location) },
}

// traceNames are the numbers of each trace; those of the dispersion trace have "dispersion_" before them.
var traceNames = map[string]func(*pb.TraceLimits) grid.Value{
	"centre":        func(t *pb.TraceLimits) grid.Value { return grid.Optional(t.Centre) },
	"sigma":         func(t *pb.TraceLimits) grid.Value { return grid.Optional(t.Sigma) },
	"lower_action":  func(t *pb.TraceLimits) grid.Value { return lineOf(t.LowerAction) },
	"lower_warning": func(t *pb.TraceLimits) grid.Value { return lineOf(t.LowerWarning) },
	"upper_warning": func(t *pb.TraceLimits) grid.Value { return lineOf(t.UpperWarning) },
	"upper_action":  func(t *pb.TraceLimits) grid.Value { return lineOf(t.UpperAction) },
}

const ofDispersion = "dispersion_"

func init() {
	for name, of := range traceNames {
		names[name] = func(v *pb.Version) grid.Value { return ofTrace(v.Location, of) }
		names[ofDispersion+name] = func(v *pb.Version) grid.Value { return ofTrace(v.Dispersion, of) }
	}
	for name, of := range places {
		names[inUnit+name] = func(v *pb.Version) grid.Value {
			if o := v.Location.GetOriginal(); o != nil {
				return grid.Optional(of(o))
			}
			return grid.Value{}
		}
	}
	names["scale"] = func(v *pb.Version) grid.Value { return scaleOf(v.Model) }
	names["inspected"] = func(v *pb.Version) grid.Value {
		if n := v.GetModel().GetInspected(); n > 0 {
			return grid.Float(n)
		}
		return grid.Value{}
	}
	names[ofDispersion+"rules"] = func(v *pb.Version) grid.Value { return rulesOf(v.Dispersion) }
}

// inUnit begins the names of places in the chart's unit, where the chart is judged on a transformed scale; they are blank
// elsewhere.
const inUnit = "original_"

// scaleOf names the scale that centre, sigma and lines are on; blank where it is the chart's unit.
func scaleOf(m *pb.Model) grid.Value {
	switch {
	case m.GetTransform().GetKind() != pb.TransformKind_TRANSFORM_KIND_UNSPECIFIED:
		return grid.Of(word(m.Transform.Kind.String(), "TRANSFORM_KIND_"))
	case len(m.GetLevels()) > 0:
		return grid.Of("STANDARDISED")
	}
	return grid.Value{}
}

func ofTrace(t *pb.TraceLimits, of func(*pb.TraceLimits) grid.Value) grid.Value {
	if t == nil {
		return grid.Value{}
	}
	return of(t)
}

func lineOf(l *pb.Line) grid.Value {
	if l == nil {
		return grid.Value{}
	}
	return grid.Optional(l.Value)
}

// rulesOf names the rules of a trace, by their set where they are one.
func rulesOf(t *pb.TraceLimits) grid.Value {
	if t.GetRuleSet() != "" {
		return grid.Of(t.RuleSet)
	}
	ids := make([]string, len(t.GetRules()))
	for i, r := range t.GetRules() {
		ids[i] = r.Id
	}
	return grid.Of(strings.Join(ids, " "))
}

// Names lists what a cell can ask for of a version.
func Names() []string {
	all := make([]string, 0, len(names))
	for n := range names {
		all = append(all, n)
	}
	sort.Strings(all)
	return all
}

// valueOf gives a number of a version; one that the version does not have is refused, so that a cell never takes an absent
// line for an empty text or 0.
func valueOf(v *pb.Version, name string) (grid.Value, error) {
	of := names[name]
	if of == nil {
		return grid.Value{}, unknownName(name)
	}
	value := of(v)
	if value.Kind == grid.Blank {
		return value, refuse("version %d of chart %q has no %s", v.Number, v.Chart, name)
	}
	return value, nil
}
