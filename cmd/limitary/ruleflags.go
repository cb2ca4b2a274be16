package main

import (
	"fmt"
	"slices"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/report/judged"
	"limitary/internal/rules"
)

// parseKind reads --kind; empty is a chart of statistics as given.
func parseKind(text string) (chart.Kind, error) {
	if text == "" {
		return chart.Given, nil
	}
	k, err := chart.ParseKind(text)
	if err != nil {
		return k, fmt.Errorf("--kind %q: want individuals, xbar_r or xbar_s", text)
	}
	return k, nil
}

// ruleFlags choose the rules of both traces.
type ruleFlags struct{ location, dispersion string }

func (r *ruleFlags) register(f *flagSet) {
	ids := make([]string, 0)
	for _, s := range rules.Sets() {
		ids = append(ids, s.ID)
	}
	f.StringVar(&r.location, "rules", rules.DefaultSet, "`SET` of rules, or several separated by commas: "+strings.Join(ids, ", "))
	f.StringVar(&r.dispersion, "dispersion-rules", "", "`SET` for the dispersion trace, or none; if not given, those of --rules that suit it")
}

// sets gives the named sets.
func (r *ruleFlags) sets(flag, text string) (sets []rules.Set, err error) {
	for _, id := range strings.Split(text, ",") {
		id = strings.TrimSpace(id)
		s, ok := rules.SetByID(id)
		if !ok {
			ids := make([]string, 0)
			for _, each := range rules.Sets() {
				ids = append(ids, each.ID)
			}
			return nil, fmt.Errorf("--%s %q: there is no such set; want one or several of %s", flag, id, strings.Join(ids, ", "))
		}
		if slices.ContainsFunc(sets, func(had rules.Set) bool { return had.ID == id }) {
			return nil, fmt.Errorf("--%s: the set %s is named twice", flag, id)
		}
		sets = append(sets, s)
	}
	return sets, nil
}

// choice is the rules of both traces and where they come from.
type choice struct {
	sets  []rules.Set
	specs [chart.Roles][]rules.Spec
	// cautions are what to know of the choice.
	cautions []string
}

// choose gives the rules for a chart of the kind.
func (r *ruleFlags) choose(kind chart.Kind) (c choice, err error) {
	if c.sets, err = r.sets("rules", r.location); err != nil {
		return c, err
	}
	c.specs[chart.Location] = specsOf(c.sets)
	if n := len(c.specs[chart.Location]); n > rules.RulesMax {
		return c, fmt.Errorf("--rules: %d rules in all, the limit is %d", n, rules.RulesMax)
	}
	if kind == chart.Given {
		if r.dispersion != "" {
			return c, fmt.Errorf("--dispersion-rules %s: statistics as given make one trace; name a --kind for a second", r.dispersion)
		}
		return c, nil
	}
	err = r.chooseDispersion(kind, &c)
	return c, err
}

func (r *ruleFlags) chooseDispersion(kind chart.Kind, c *choice) error {
	from, asked := c.specs[chart.Location], r.dispersion != ""
	switch {
	case r.dispersion == "none":
		return nil
	case asked:
		sets, err := r.sets("dispersion-rules", r.dispersion)
		if err != nil {
			return err
		}
		from = specsOf(sets)
		for _, s := range sets {
			if !slices.ContainsFunc(c.sets, func(had rules.Set) bool { return had.ID == s.ID }) {
				c.sets = append(c.sets, s)
			}
		}
	}
	taken, left := judged.DispersionRules(kind, from, asked)
	if asked && len(taken) == 0 {
		return fmt.Errorf("--dispersion-rules %s: none of its rules suits a dispersion trace", r.dispersion)
	}
	c.specs[chart.Dispersion] = taken
	if len(left) > 0 {
		why := "its statistics are skewed"
		if kind == chart.Individuals {
			why += " and neighbouring moving ranges share a value"
		}
		c.cautions = append(c.cautions, fmt.Sprintf("Not used on the dispersion trace: %s; %s, so that the false alarms of these rules would not be their nominal ones.",
			strings.Join(left, ", "), why))
	}
	if kind == chart.Individuals && slices.ContainsFunc(taken, func(s rules.Spec) bool { return s.Window() > 1 }) {
		c.cautions = append(c.cautions, "Neighbouring moving ranges share a value: expect more patterns among them than the nominal rate of the rules.")
	}
	return nil
}

func specsOf(sets []rules.Set) (specs []rules.Spec) {
	for _, s := range sets {
		specs = append(specs, s.Rules...)
	}
	return specs
}
