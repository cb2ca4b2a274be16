package service

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

func standingToProto(s judge.Standing) pb.Standing {
	if s == judge.NotJudged {
		return pb.Standing_STANDING_NOT_JUDGED
	}
	return pb.Standing(s)
}

func notJudgedToProto(r judge.Reason) pb.NotJudgedReason { return pb.NotJudgedReason(r) }

func traceVerdictToProto(statistic float64, at rules.Scale, l judge.Lines) *pb.TraceVerdict {
	out := &pb.TraceVerdict{
		Statistic: &statistic, Centre: l.Centre,
		LowerAction: l.LowerAction, UpperAction: l.UpperAction, LowerWarning: l.LowerWarning, UpperWarning: l.UpperWarning,
	}
	if at.Sigma > 0 {
		out.Sigma = &at.Sigma
	}
	return out
}
