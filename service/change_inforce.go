package service

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/limits"
)

// inForceFromProto reads limits in force that were sent along.
func inForceFromProto(in *pb.InForce, kind chart.Kind, size int) (changetest.InForce, error) {
	f := changetest.InForce{
		Kind: kind, SubgroupSize: size, Centre: in.Centre, Sigma: in.ProcessSigma,
		CentreTarget: in.CentreGiven, SigmaTarget: in.SigmaGiven, Groups: int(in.N), Readings: int(in.Readings),
		DegreesOfFreedom: in.DegreesOfFreedom, BetweenSigma: in.BetweenSigma,
	}
	var err error
	if f.Estimator, err = estimatorFromProto(in.Estimator); err != nil {
		return f, err
	}
	if !kind.Counts() && !kind.Duplicates() {
		return f, nil
	}
	if f.Model, err = modelFromProto(in.Model); err != nil {
		return f, under("model", err)
	}
	f.Inspected = in.Inspected
	for _, p := range in.Parts {
		addPart(&f, p.GetName(), p.GetOrigin() == pb.Origin_ORIGIN_GIVEN, p.GetDegreesOfFreedom())
	}
	return f, nil
}

// inForce describes a version.
func inForce(v definition.Content) changetest.InForce {
	f := changetest.InForce{
		Kind: v.Kind, SubgroupSize: v.SubgroupSize, Sigma: v.ProcessSigma,
		CentreTarget: v.CentreGiven, SigmaTarget: v.SigmaGiven, Groups: v.Groups, Readings: v.Readings,
	}
	if v.Location != nil && v.Location.Centre != nil {
		f.Centre = *v.Location.Centre
	}
	if v.Model != nil {
		f.Model = *v.Model
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
	for _, p := range v.Parts {
		addPart(&f, p.Name, p.Given, p.DegreesOfFreedom)
	}
	return f
}

// addPart takes up one sigma of duplicates. The figures of a function say nothing of the error of the whole.
func addPart(f *changetest.InForce, name string, given bool, freedom float64) {
	if name != limits.PartS0 && name != limits.PartB {
		f.Parts = append(f.Parts, changetest.Part{Target: given, DegreesOfFreedom: freedom})
	}
}
