package service

import (
	"context"
	"errors"
	"fmt"
	"math"
	"strings"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/limits"
	"limitary/internal/store"
)

// looksPeriod is the time over which looks at the limits of a track are counted.
const looksPeriod = 365 * 24 * time.Hour

// CanCompare reports whether limits of a kind can be set against new data.
func CanCompare(kind chart.Kind) bool {
	return changetest.Compared(kind)
}

// CompareSent sets the data of a computation against figures in force that were sent along. A refusal of group i names it
// by path; nil leaves the name of package changetest.
func CompareSent(in *pb.InForce, req limits.Request, path func(i int, tail string) string) (*pb.ChangeTest, error) {
	if !CanCompare(req.Kind) {
		return nil, definition.Invalid("kind", "charts of kind %s are not set against limits in force", req.Kind)
	}
	old, err := inForceFromProto(in, req.Kind, req.SubgroupSize)
	if err != nil {
		return nil, under("in_force", err)
	}
	looks := int(in.Looks)
	if looks == 0 {
		looks = 1
	}
	r := changetest.Request{
		InForce:   old,
		Relevance: changetest.Relevance{CentreSigmas: in.GetRelevantShiftSigmas(), SigmaRatio: in.GetRelevantSigmaRatio()},
		Trigger:   trigger(in.AfterSignal), Looks: looks,
	}
	model := chart.Model{Transform: req.Transform, Levels: req.Levels}
	for _, g := range req.Groups {
		r.Groups = append(r.Groups, changetest.Group{Group: onScale(g, &model)})
	}
	res, err := changetest.Compare(r)
	if err != nil {
		return nil, changeRefusal(err, path)
	}
	out := changeOf(res)
	return changeTestToProto(&out), nil
}

func trigger(afterSignal bool) changetest.Trigger {
	if afterSignal {
		return changetest.AfterSignal
	}
	return changetest.Planned
}

// compareStored sets the data of a proposal against the version it would follow, on that version's scale; nil where there
// is none, or where it has no centre.
func (s *LimitService) compareStored(ctx context.Context, who store.Actor, p *proposal, c definition.Chart, basis *basisData) (*definition.ChangeTest, error) {
	if !CanCompare(c.Kind) || len(basis.groups) == 0 {
		return nil, nil
	}
	v, err := s.store.VersionInForce(ctx, who, c.Name, p.in.Lot, p.effectiveFrom)
	var refused *definition.Error
	if errors.As(err, &refused) {
		return nil, nil // nothing is in force
	}
	if err != nil {
		return nil, err
	}
	looks, err := s.store.CountProposals(ctx, who, c.Name, p.in.Lot, looksPeriod)
	if err != nil {
		return nil, err
	}
	if centred := v.Location != nil && v.Location.Centre != nil; !centred && !v.Kind.Duplicates() {
		return nil, nil
	}
	shift, ratio := c.Relevance()
	req := changetest.Request{
		InForce: inForce(v.Content), Looks: looks + 1, Trigger: trigger(p.in.AfterSignal),
		Relevance: changetest.Relevance{CentreSigmas: shift, SigmaRatio: ratio},
	}
	for i, g := range basis.groups {
		req.Groups = append(req.Groups, changetest.Group{Group: onScale(g, v.Model), InOldBasis: basis.inBasisOf(v.Content, i)})
	}
	res, err := changetest.Compare(req)
	if err != nil {
		return nil, changeRefusal(err, basis.path)
	}
	out := changeOf(res)
	out.Against = v.Number
	if v.BasisFrom == nil && !(v.CentreGiven && v.SigmaGiven) {
		out.Notes = append(out.Notes, fmt.Sprintf("The basis of version %d is data that were sent along, so it is not known whether any of these results are in it; all were taken as new.", v.Number))
	}
	return &out, nil
}

// inBasisOf reports whether group i is of the time of a version's stored basis.
func (b *basisData) inBasisOf(v definition.Content, i int) bool {
	if v.BasisFrom == nil || v.BasisTo == nil || i >= len(b.times) {
		return false
	}
	at := b.times[i]
	return !at.Before(*v.BasisFrom) && at.Before(*v.BasisTo)
}

// onScale gives a group with its readings on the judged scale. One with a reading that has no place there is left out.
func onScale(g limits.Group, m *chart.Model) limits.Group {
	if m == nil || !m.Scaled() {
		return g
	}
	readings, placed := make([]float64, len(g.Readings)), true
	for i, x := range g.Readings {
		var ok bool
		readings[i], ok = m.OnScale(x, g.Material)
		placed = placed && ok
	}
	g.Readings, g.Decimals = readings, limits.DecimalsUnknown
	if !placed && !g.Excluded {
		g.Excluded, g.ExclusionReason = true, "it has no place on the scale of the limits in force"
	}
	return g
}

func changeRefusal(err error, path func(i int, tail string) string) error {
	var e *changetest.Error
	if !errors.As(err, &e) {
		return err
	}
	if strings.HasPrefix(e.Field, "groups[") && path != nil {
		return computeRefusal(err, path)
	}
	name, text := strings.TrimPrefix(e.Field, "inForce."), e.Problem
	if !strings.HasPrefix(name, "model.") && !strings.HasPrefix(name, "groups[") { // which have other names
		name = changeNames.Replace(name)
	}
	if e.Value != "" {
		text = e.Value + ": " + e.Problem
	}
	return definition.Invalid("in_force."+name, "%s", text)
}

// changeNames turns the field names of package changetest into those of the contract.
var changeNames = strings.NewReplacer("subgroupSize", "subgroup_size", "degreesOfFreedom", "degrees_of_freedom", "groups", "n", "sigma", "process_sigma",
	"betweenSigma", "between_sigma", "relevance.centreSigmas", "relevant_shift_sigmas", "relevance.sigmaRatio", "relevant_sigma_ratio")

func changeOf(r changetest.Result) definition.ChangeTest {
	out := definition.ChangeTest{
		Results: r.Groups, Excluded: r.ExcludedLeftOut, InOldBasis: r.BasisLeftOut,
		Decision: r.Decision.String(),
		Looks:    r.Looks.Count, OneWrongMax: r.Looks.OneWrongMax, Lag1: r.Correlation.Lag1,
		EffectiveForCentre: r.Correlation.EffectiveForCentre, EffectiveForSpread: r.Correlation.EffectiveForSpread, Text: r.Sentence,
	}
	if r.Centre != nil {
		out.Centre = figureOf(*r.Centre)
	}
	if r.Spread != nil {
		out.Spread = figureOf(*r.Spread)
	}
	if r.Means != nil {
		means := figureOf(*r.Means)
		out.Means = &means
	}
	return out
}

func figureOf(c changetest.Comparison) definition.ChangeFigure {
	out := definition.ChangeFigure{
		Estimate: c.Estimate, RelevantLower: c.Relevance.Lower, RelevantUpper: c.Relevance.Upper, Decision: c.Decision.String(),
		Reason: c.Reason.String(), Differs: c.Differs, PValid: c.PValid, PReason: c.PReason, Text: c.Sentence,
	}
	if c.Interval != nil {
		out.Lower, out.Upper = finiteOnly(c.Interval.Lower), finiteOnly(c.Interval.Upper)
	}
	if c.Test != nil {
		out.P = finiteOnly(c.Test.P)
	}
	if c.Plain != nil {
		out.PlainP = finiteOnly(c.Plain.P)
	}
	if c.Needed != nil && c.Needed.Reachable {
		out.Needed = &c.Needed.Groups
	}
	if c.Published != nil {
		out.PublishedDecision = c.Published.Decision.String()
	}
	return out
}

// finiteOnly gives nil for a figure that cannot be written as a number.
func finiteOnly(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

func changeTestToProto(c *definition.ChangeTest) *pb.ChangeTest {
	if c == nil {
		return nil
	}
	out := &pb.ChangeTest{
		Against: int32(c.Against), Results: int32(c.Results), Excluded: int32(c.Excluded), InOldBasis: int32(c.InOldBasis),
		Centre: figureToProto(c.Centre), Spread: figureToProto(c.Spread), Decision: decisionToProto(c.Decision),
		Looks: int32(c.Looks), OneWrongMax: c.OneWrongMax, Lag1: c.Lag1, EffectiveForCentre: c.EffectiveForCentre,
		EffectiveForSpread: c.EffectiveForSpread, Text: c.Text, Notes: c.Notes,
	}
	if c.Means != nil {
		out.Means = figureToProto(*c.Means)
	}
	return out
}

// figureToProto writes a figure; nil where the kind has no such figure, which is then without a decision.
func figureToProto(f definition.ChangeFigure) *pb.ChangeFigure {
	if f.Decision == "" {
		return nil
	}
	out := &pb.ChangeFigure{
		Estimate: f.Estimate, Lower: f.Lower, Upper: f.Upper, RelevantLower: f.RelevantLower, RelevantUpper: f.RelevantUpper,
		Decision: decisionToProto(f.Decision), Reason: f.Reason, Differs: f.Differs, PublishedDecision: decisionToProto(f.PublishedDecision),
		P: f.P, PValid: f.PValid, PReason: f.PReason, PlainP: f.PlainP, Text: f.Text,
	}
	if f.Needed != nil {
		n := int32(*f.Needed)
		out.Needed = &n
	}
	return out
}

func decisionToProto(name string) pb.ChangeDecision {
	return pb.ChangeDecision(pb.ChangeDecision_value["CHANGE_DECISION_"+name])
}
