package service

import (
	"context"
	"sync"

	pb "limitary/api/limitary/v1"
	"limitary/internal/rules"
)

// catalogue is the published sets by id, made once: they never change. Nobody may change what it holds.
var catalogue = sync.OnceValue(func() map[string]rules.Set {
	sets := map[string]rules.Set{}
	for _, s := range rules.Sets() {
		sets[s.ID] = s
	}
	return sets
})

// RuleService shows the catalogue of rules.
type RuleService struct {
	pb.UnimplementedRuleServiceServer
}

// ListRules gives the published sets in the order of the catalogue.
func (*RuleService) ListRules(context.Context, *pb.ListRulesRequest) (*pb.ListRulesResponse, error) {
	out := &pb.ListRulesResponse{Judges: []int32{rules.JudgeNumber}}
	for _, s := range rules.Sets() {
		set := &pb.RuleSet{Id: s.ID, Title: s.Title, Source: s.Source, Provenance: s.Provenance, Default: s.ID == rules.DefaultSet}
		for _, spec := range s.Rules {
			means, look := spec.Advice()
			set.Rules = append(set.Rules, &pb.CatalogueRule{Spec: specToProto(spec), Description: spec.Describe(), Means: means, LookFirst: look})
		}
		out.RuleSets = append(out.RuleSets, set)
	}
	return out, nil
}
