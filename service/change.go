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
	return changetest.Estimators(kind) != nil
}

// CompareSent sets the data of a computation against figures in force that were sent along.
func CompareSent(in *pb.InForce, req limits.Request) (*pb.ChangeTest, error) {
	if !CanCompare(req.Kind) {
		return nil, definition.Invalid("kind", "charts of kind %s are not set against limits in force", req.Kind)
	}
	estimator, err := estimatorFromProto(in.Estimator)
	if err != nil {
		return nil, err
	}
	looks := int(in.Looks)
	if looks == 0 {
		looks = 1
	}
	r := changetest.Request{
		InForce: changetest.InForce{Kind: req.Kind, SubgroupSize: req.SubgroupSize, Centre: in.Centre, Sigma: in.ProcessSigma,
			CentreTarget: in.CentreGiven, SigmaTarget: in.SigmaGiven, Groups: int(in.N), Readings: int(in.Readings),
			Estimator: estimator, DegreesOfFreedom: in.DegreesOfFreedom, BetweenSigma: in.BetweenSigma},
		Relevance: changetest.Relevance{CentreSigmas: in.GetRelevantShiftSigmas(), SigmaRatio: in.GetRelevantSigmaRatio()},
		Trigger:   trigger(in.AfterSignal), Looks: looks,
	}
	model := chart.Model{Transform: req.Transform, Levels: req.Levels}
	for _, g := range req.Groups {
		r.Groups = append(r.Groups, changetest.Group{Group: onScale(g, &model)})
	}
	res, err := changetest.Compare(r)
	if err != nil {
		return nil, changeRefusal(err)
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

// compareStored sets the data of a proposal against the version it would follow; nil where there is none, or where the
// two do not speak of the same figure.
func (s *LimitService) compareStored(ctx context.Context, who store.Actor, p *proposal, c definition.Chart, basis *basisData, model *chart.Model) (*definition.ChangeTest, error) {
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
	if !sameScale(v.Model, model) || v.Location == nil || v.Location.Centre == nil {
		return nil, nil
	}
	shift, ratio := c.Relevance()
	req := changetest.Request{
		InForce: inForce(v.Content), Looks: looks + 1, Trigger: trigger(p.in.AfterSignal),
		Relevance: changetest.Relevance{CentreSigmas: shift, SigmaRatio: ratio},
	}
	for i, g := range basis.groups {
		req.Groups = append(req.Groups, changetest.Group{Group: onScale(g, model), InOldBasis: basis.inBasisOf(v.Content, i)})
	}
	res, err := changetest.Compare(req)
	if err != nil {
		return nil, changeRefusal(err)
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

func inForce(v definition.Content) changetest.InForce {
	f := changetest.InForce{
		Kind: v.Kind, SubgroupSize: v.SubgroupSize, Centre: *v.Location.Centre, Sigma: v.ProcessSigma,
		CentreTarget: v.CentreGiven, SigmaTarget: v.SigmaGiven, Groups: v.Groups, Readings: v.Readings,
	}
	if v.Kind == chart.RunMeans && v.Model != nil {
		f.BetweenSigma = &v.Model.BetweenSigma
	}
	for _, e := range v.Estimates {
		if e.Chosen {
			f.DegreesOfFreedom = e.DegreesOfFreedom
			f.Estimator, _ = limits.ParseEstimator(e.Name)
		}
	}
	return f
}

// sameScale reports whether two versions are judged on one scale, so that their figures can be compared.
func sameScale(a, b *chart.Model) bool {
	var none chart.Model
	if a == nil {
		a = &none
	}
	if b == nil {
		b = &none
	}
	return a.Transform == b.Transform && len(a.Levels) == len(b.Levels)
}

// onScale gives a group with its readings on the judged scale. What has no place there has been refused before.
func onScale(g limits.Group, m *chart.Model) limits.Group {
	if m == nil || m.Transform.Kind == chart.Identity && len(m.Levels) == 0 {
		return g
	}
	level, _ := m.LevelOf(g.Material)
	readings := make([]float64, len(g.Readings))
	for i, x := range g.Readings {
		if readings[i], _ = m.Transform.Apply(x); len(m.Levels) > 0 {
			readings[i] = (x - level.Reference) / level.Sigma
		}
	}
	g.Readings, g.Decimals = readings, limits.DecimalsUnknown
	return g
}

func changeRefusal(err error) error {
	var e *changetest.Error
	if !errors.As(err, &e) {
		return err
	}
	names := strings.NewReplacer("inForce.", "", "subgroupSize", "subgroup_size", "degreesOfFreedom", "degrees_of_freedom", "groups", "n", "sigma", "process_sigma",
		"relevance.centreSigmas", "relevant_shift_sigmas", "relevance.sigmaRatio", "relevant_sigma_ratio")
	return definition.Invalid(names.Replace(e.Field), "%s: %s", e.Value, e.Problem)
}

func changeOf(r changetest.Result) definition.ChangeTest {
	out := definition.ChangeTest{
		Results: r.Groups, Excluded: r.ExcludedLeftOut, InOldBasis: r.BasisLeftOut,
		Centre: figureOf(r.Centre), Spread: figureOf(r.Spread), Decision: r.Decision.String(),
		Looks: r.Looks.Count, OneWrongMax: r.Looks.OneWrongMax, Lag1: r.Correlation.Lag1,
		EffectiveForCentre: r.Correlation.EffectiveForCentre, EffectiveForSpread: r.Correlation.EffectiveForSpread, Text: r.Sentence,
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

func figureToProto(f definition.ChangeFigure) *pb.ChangeFigure {
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
