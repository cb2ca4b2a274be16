package main

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/report"
)

// changeOf gives a change test as reports write it; nil where there is none.
func changeOf(in *pb.ChangeTest, against string) *report.Change {
	if in == nil {
		return nil
	}
	out := &report.Change{
		Against: against, Decision: decisionWord(in.Decision), Text: in.Text, Notes: in.Notes, Looks: int(in.Looks), OneWrongMax: in.OneWrongMax,
	}
	for _, f := range []struct {
		name string
		in   *pb.ChangeFigure
	}{{"centre, sigmas away", in.Centre}, {"spread, ratio", in.Spread}, {"spread of means, ratio", in.Means}} {
		if f.in != nil {
			out.Figures = append(out.Figures, figureOf(f.name, f.in))
		}
	}
	return out
}

func figureOf(name string, in *pb.ChangeFigure) report.ChangeFigure {
	out := report.ChangeFigure{
		Name: name, Estimate: in.Estimate, Lower: in.Lower, Upper: in.Upper, RelevantLower: in.RelevantLower, RelevantUpper: in.RelevantUpper,
		Decision: decisionWord(in.Decision), Text: in.Text, P: in.P, PValid: in.PValid, PReason: in.PReason, PlainP: in.PlainP,
	}
	if in.Needed != nil {
		needed := int(*in.Needed)
		out.Needed = &needed
	}
	return out
}

func decisionWord(d pb.ChangeDecision) string { return enumWord(d.String(), "CHANGE_DECISION_") }
