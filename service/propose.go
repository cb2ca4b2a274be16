package service

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/diagnostics"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// ProposeVersion computes a version from stored results, from data sent along or from figures given, and stores it for
// approval.
func (s *LimitService) ProposeVersion(ctx context.Context, in *pb.ProposeVersionRequest) (*pb.ProposeVersionResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err != nil {
		return nil, err
	}
	p, err := readProposal(in)
	if err != nil {
		return nil, err
	}
	c, err := s.store.GetChart(ctx, who, in.Chart)
	if err != nil {
		return nil, err
	}
	content, refused := s.content(ctx, who, p, c)
	var refusal *definition.Error
	if refused != nil && !errors.As(refused, &refusal) {
		return nil, refused
	}
	// A refusal goes along as well: where this repeats an earlier request, its answer is given, whatever has become of
	// the data since.
	v, err := s.store.ProposeVersion(ctx, who, req, in.Chart, func(number int, proposedAt time.Time) (definition.Content, error) {
		numbered := content
		numbered.Number, numbered.ProposedAt = number, proposedAt
		return numbered, refused
	})
	if err != nil {
		return nil, err
	}
	out, err := s.version(ctx, who, in.Chart, v.Number)
	if err != nil {
		return nil, err
	}
	return &pb.ProposeVersionResponse{Version: out}, nil
}

// proposal is a request as far as it can be understood without its chart.
type proposal struct {
	in                   *pb.ProposeVersionRequest
	compute              limits.Request
	effectiveFrom        time.Time
	from, to             time.Time // of a stored basis
	location, dispersion []rules.Spec
	sides                rules.Sides
}

func readProposal(in *pb.ProposeVersionRequest) (*proposal, error) {
	p := &proposal{in: in, compute: limits.Request{Centre: in.Centre, Sigma: in.ProcessSigma}}
	if err := settings(&p.compute, in.Estimator, in.PublishedDecimals, in.LocationLines, in.DispersionLines); err != nil {
		return nil, err
	}
	var err error
	if p.sides, err = readOptions(in.Options, &p.compute); err != nil {
		return nil, under("options", err)
	}
	if p.effectiveFrom, err = readMoment("effective_from", in.EffectiveFrom); err != nil {
		return nil, err
	}
	if p.effectiveFrom.IsZero() {
		return nil, definition.Invalid("effective_from", "is not set; the version judges results measured at or after it")
	}
	err = first(definition.CheckSlug("chart", in.Chart), checkName("lot", in.Lot, 0), definition.CheckText("reason", in.Reason, 1, ReasonBytesMax),
		tooMany("accepted_cautions", len(in.AcceptedCautions), PatternsMax, "cautions"),
		definition.CheckText("instructions.look", in.Instructions.GetLook(), 0, definition.TextBytesMax),
		definition.CheckText("instructions.act", in.Instructions.GetAct(), 0, definition.TextBytesMax),
		definition.CheckText("instructions.stop", in.Instructions.GetStop(), 0, definition.TextBytesMax))
	if err != nil {
		return nil, err
	}
	if p.location, err = rulesFromProto(in.LocationRules.GetRules(), in.LocationRules.GetRuleSet()); err != nil {
		return nil, under("location_rules", err)
	}
	if p.location, err = watched("location_rules", p.location, p.sides); err != nil {
		return nil, err
	}
	if p.dispersion, err = rulesFromProto(in.DispersionRules.GetRules(), in.DispersionRules.GetRuleSet()); err != nil {
		return nil, under("dispersion_rules", err)
	}
	if len(p.location)+len(p.dispersion) == 0 {
		return nil, definition.Invalid("location_rules", "a version without a rule judges nothing; give rules or rule_set for at least one trace")
	}
	return p, p.readBasis()
}

func (p *proposal) readBasis() error {
	var err error
	switch b := p.in.GetBasis().(type) {
	case nil:
	case *pb.ProposeVersionRequest_Stored:
		if p.from, p.to, err = readBetween(b.Stored.GetFrom(), b.Stored.GetTo()); err != nil {
			return under("stored", err)
		}
		if p.from.IsZero() || p.to.IsZero() {
			return definition.Invalid("stored.from", "from and to are both needed")
		}
		return tooMany("stored.exclusions", len(b.Stored.GetExclusions()), ExclusionsMax, "exclusions")
	case *pb.ProposeVersionRequest_Sent:
		return first(definition.CheckText("sent.description", b.Sent.GetDescription(), 0, definition.TextBytesMax),
			tooMany("sent.exclusions", len(b.Sent.GetExclusions()), ExclusionsMax, "exclusions"))
	}
	return nil
}

// content makes the version, but for its number and time.
func (s *LimitService) content(ctx context.Context, who store.Actor, p *proposal, c definition.Chart) (definition.Content, error) {
	var none definition.Content
	switch {
	case c.Archived:
		return none, &definition.Error{Reason: definition.ChartArchived, Field: "chart", Text: fmt.Sprintf("%q is archived", c.Name)}
	case !c.LotsAreTracks && p.in.Lot != "":
		return none, definition.Invalid("lot", "%q: lots are not tracks on chart %q", clip(p.in.Lot), c.Name)
	case c.LotsAreTracks && p.in.Lot == "" && p.in.GetStored() != nil:
		return none, definition.Invalid("lot", "is empty; statistics belong to one lot, so a stored basis names it")
	}
	p.compute.Kind, p.compute.SubgroupSize = c.Kind, c.SubgroupSize
	if p.compute.PublishedDecimals == nil {
		p.compute.PublishedDecimals = c.Decimals
	}
	if own := c.Kind.Counts() || c.Kind.Duplicates(); p.in.GetBasis() == nil && !own && (p.in.Centre == nil || p.in.ProcessSigma == nil) {
		return none, definition.Invalid("basis", "is not set; give stored or sent data, or both centre and process_sigma")
	}
	basis, err := s.basis(ctx, who, p, c)
	if err != nil {
		return none, err
	}
	p.compute.Groups = basis.groups
	made, err := compute(p.compute, basis.about(), basis.path)
	if err != nil {
		return none, err
	}
	res := made.result
	for role, specs := range map[chart.Role][]rules.Spec{chart.Location: p.location, chart.Dispersion: p.dispersion} {
		if len(specs) > 0 && !c.Kind.Has(role) {
			return none, definition.Invalid(role.String()+"_rules", "are given, but a chart of kind %s has no %s trace", c.Kind, role)
		}
	}
	if c.Kind.Duplicates() { // replicates that agree too well are no fault
		if p.in.GetOptions().GetOneSided() != pb.WatchedSide_WATCHED_SIDE_UNSPECIFIED {
			return none, definition.Invalid("options.one_sided", "is given, but a chart of kind %s watches the upper side by itself", c.Kind)
		}
		if p.dispersion, err = watched("dispersion_rules", p.dispersion, rules.UpperOnly); err != nil {
			return none, err
		}
	}
	found := cautions(c.Kind, p.location, p.dispersion, append(res.Findings, made.diagnostics.Findings...))
	if err := accept(found, p.in.AcceptedCautions); err != nil {
		return none, err
	}
	content := p.describe(c, who, res, basis)
	if content.ChangeTest, err = s.compareStored(ctx, who, p, c, basis); err != nil {
		return none, err
	}
	content.Findings = append(findingsOf(res), foundBy(made.diagnostics)...)
	for _, f := range found { // a caution about a finding of the computation is that finding
		if !slices.ContainsFunc(content.Findings, func(have definition.Finding) bool { return have.Code == f.Code }) {
			content.Findings = append(content.Findings, f)
		}
	}
	return content, checkContent(content)
}

func (p *proposal) describe(c definition.Chart, who store.Actor, res limits.Result, basis *basisData) definition.Content {
	content := definition.Content{
		Chart: c.Name, Lot: p.in.Lot, Kind: c.Kind, SubgroupSize: c.SubgroupSize, Unit: c.Unit,
		Decimals: res.PublishedDecimals, ProcessSigma: res.ProcessSigma,
		Components: componentsOf(res), Tails: tailsOf(res), Parts: partsOf(res), FalseAlarm: falseAlarmOf(res), Compared: comparedOf(res),
		Groups: res.N, Readings: res.Readings, CentreGiven: res.CentreOrigin == limits.Target, SigmaGiven: res.SigmaOrigin == limits.Target,
		Provisional: res.Provisional, Estimates: estimatesOf(res), Intervals: intervalsOf(res), Basis: basis.text,
		Excluded: []definition.Excluded{}, ExcludedPoints: []definition.Excluded{},
		Author: who.Principal, Reason: p.in.Reason, EffectiveFrom: p.effectiveFrom,
		Instructions: definition.Instructions{Look: p.in.Instructions.GetLook(), Act: p.in.Instructions.GetAct(), Stop: p.in.Instructions.GetStop()},
		Judge:        rules.JudgeNumber,
	}
	if c.Kind.Has(chart.Location) {
		content.Location = &definition.Trace{Trace: res.Location, RuleSet: p.in.LocationRules.GetRuleSet(), Rules: p.location}
	}
	if c.Kind.Has(chart.Dispersion) {
		content.Dispersion = &definition.Trace{Trace: res.Dispersion, RuleSet: p.in.DispersionRules.GetRuleSet(), Rules: p.dispersion}
	}
	if !emptyModel(res.Model) {
		content.Model = &res.Model
	}
	if p.in.GetStored() != nil {
		content.BasisFrom, content.BasisTo = &p.from, &p.to
	}
	for _, e := range res.Estimates {
		if e.Chosen {
			content.Estimator = e.Name.String()
		}
	}
	for _, e := range res.Excluded {
		if basis.keys != nil {
			k := basis.keys[e.Group]
			content.Excluded = append(content.Excluded, definition.Excluded{Source: k.source, SourceID: k.id, Reason: e.Reason})
		} else {
			content.ExcludedPoints = append(content.ExcludedPoints, definition.Excluded{Point: basis.points[e.Group], Reason: e.Reason})
		}
	}
	return content
}

// checkContent makes sure that the judge can work by the version before it gets a number.
func checkContent(c definition.Content) error {
	for _, t := range []*definition.Trace{c.Location, c.Dispersion} {
		if t != nil && t.Rules == nil {
			t.Rules = []rules.Spec{}
		}
	}
	_, err := judge.New(c.JudgeLimits())
	if err == nil {
		return nil
	}
	e, ok := err.(*judge.Error)
	if !ok {
		return err
	}
	field := e.Field
	for _, role := range []chart.Role{chart.Location, chart.Dispersion} {
		if rest, cut := cutPrefix(field, role.String()+".rules"); cut {
			field = role.String() + "_rules.rules" + rest
		}
	}
	return definition.Invalid(field, "%s", e.Problem)
}

func cutPrefix(s, prefix string) (rest string, ok bool) {
	if len(s) < len(prefix) || s[:len(prefix)] != prefix {
		return s, false
	}
	return s[len(prefix):], true
}

// basisData is the material of a version.
type basisData struct {
	groups []limits.Group
	text   string
	path   func(i int, tail string) string
	// points has the index of each group in data sent along, keys its key among stored results.
	points []int
	keys   []resultKey
	// times has the moment each stored group was measured, days and runs what tells its day and analytical run.
	times      []time.Time
	days, runs []string
}

func (b *basisData) about() diagnostics.Times { return diagnostics.Times{Days: b.days, Runs: b.runs} }

type resultKey struct{ source, id string }

func (s *LimitService) basis(ctx context.Context, who store.Actor, p *proposal, c definition.Chart) (*basisData, error) {
	switch b := p.in.GetBasis().(type) {
	case *pb.ProposeVersionRequest_Sent:
		data, err := sentFromProto(c.Kind, b.Sent.GetPoints(), b.Sent.GetSeries(), b.Sent.GetExclusions())
		if err != nil {
			return nil, under("sent", err)
		}
		text := fmt.Sprintf("Data sent along, %d points.", len(data.of))
		if d := b.Sent.GetDescription(); d != "" {
			text += " " + d
		}
		return &basisData{groups: data.groups, points: data.points, text: text, path: func(i int, tail string) string { return "sent." + data.path(i, tail) }}, nil
	case *pb.ProposeVersionRequest_Stored:
		return s.storedBasis(ctx, who, p, c)
	}
	return &basisData{text: "Centre and process sigma as given.", path: func(int, string) string { return "basis" }}, nil
}

func (s *LimitService) storedBasis(ctx context.Context, who store.Actor, p *proposal, c definition.Chart) (*basisData, error) {
	rows, err := s.store.BasisResults(ctx, who, c.Name, p.in.Lot, p.from, p.to)
	if err != nil {
		return nil, err
	}
	excluded, err := storedExclusions(p.in.GetStored().GetExclusions())
	if err != nil {
		return nil, err
	}
	zone, err := time.LoadLocation(c.DisplayZone) // checked when the chart was made; a day is the laboratory's
	if err != nil {
		zone = time.UTC
	}
	out := &basisData{keys: make([]resultKey, 0, len(rows)), path: func(int, string) string { return "stored" }}
	for _, row := range rows {
		key := resultKey{row.Result.Source, row.Result.SourceID}
		why, left := excluded[key]
		delete(excluded, key)
		g, err := storedGroup(row, c, left, why)
		if err != nil {
			return nil, err
		}
		out.groups, out.keys = append(out.groups, g), append(out.keys, key)
		out.times, out.runs = append(out.times, row.Result.MeasuredAt), append(out.runs, row.Result.RunID)
		out.days = append(out.days, row.Result.MeasuredAt.In(zone).Format(time.DateOnly))
	}
	for key := range excluded {
		return nil, definition.Invalid("stored.exclusions", "source %q, id %q is no result of the basis", clip(key.source), clip(key.id))
	}
	of := fmt.Sprintf("chart %s", c.Name)
	if p.in.Lot != "" {
		of += ", lot " + p.in.Lot
	}
	out.text = fmt.Sprintf("Stored results of %s, measured from %s to before %s: %d results, %d of them excluded.",
		of, p.from.Format(time.RFC3339Nano), p.to.Format(time.RFC3339Nano), len(rows), len(p.in.GetStored().GetExclusions()))
	return out, nil
}

func storedExclusions(in []*pb.StoredExclusion) (map[resultKey]string, error) {
	out := make(map[resultKey]string, len(in))
	for i, e := range in {
		field := func(name string) string { return fmt.Sprintf("stored.exclusions[%d].%s", i, name) }
		key := resultKey{e.GetResult().GetSource(), e.GetResult().GetSourceId()}
		err := first(checkName(field("result.source"), key.source, 1), checkName(field("result.source_id"), key.id, 1),
			definition.CheckText(field("reason"), e.Reason, 1, limits.ReasonBytesMax))
		if err != nil {
			return nil, err
		}
		if _, twice := out[key]; twice {
			return nil, definition.Invalid(field("result"), "source %q, id %q is excluded twice", clip(key.source), clip(key.id))
		}
		out[key] = e.Reason
	}
	return out, nil
}

// storedGroup turns a stored result into material for an estimate. A bound has no value to estimate from.
func storedGroup(row store.BasisRow, c definition.Chart, excluded bool, why string) (limits.Group, error) {
	pt, err := row.Result.Point(c)
	if err != nil {
		return limits.Group{}, err
	}
	g := limits.Group{Readings: pt.Readings, Count: pt.Count, Material: row.Result.Material, Decimals: row.Result.Places(), BreakBefore: row.BreakBefore, Excluded: excluded, ExclusionReason: why}
	for i, b := range pt.Bounds {
		if b != decimal.Measured && !excluded {
			return g, definition.Invalid("stored.exclusions", "source %q, id %q has the reading %q, a bound, which gives no value to estimate from; exclude it with a reason",
				clip(row.Result.Source), clip(row.Result.SourceID), row.Result.Readings[i])
		}
	}
	return g, nil
}
