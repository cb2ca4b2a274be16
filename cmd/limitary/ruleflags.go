package main

import (
	"cmp"
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
		return k, fmt.Errorf("--kind %q: want one of %s", text, chart.KindNames())
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
	f.StringVar(&r.location, "rules", "", "`SET` of rules, or several separated by commas: "+strings.Join(ids, ", ")+" (default "+rules.DefaultSet+")")
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
	if c.sets, err = r.sets("rules", cmp.Or(r.location, rules.DefaultSet)); err != nil {
		return c, err
	}
	c.specs[chart.Location] = specsOf(c.sets)
	if n := len(c.specs[chart.Location]); n > rules.RulesMax {
		return c, fmt.Errorf("--rules: %d rules in all, the limit is %d", n, rules.RulesMax)
	}
	switch {
	case kind.Has(chart.Dispersion):
		err = r.chooseDispersion(kind, &c)
	case r.dispersion != "" && kind == chart.Given:
		err = fmt.Errorf("--dispersion-rules %s: statistics as given make one trace; name a --kind for a second", r.dispersion)
	case r.dispersion != "":
		err = fmt.Errorf("--dispersion-rules %s: fits charts of kind %s, and this one is of kind %s, with a location trace alone",
			r.dispersion, kindsThat(func(k chart.Kind) bool { return k.Has(chart.Dispersion) }), kind)
	}
	switch {
	case !kind.Has(chart.Location):
		c.specs[chart.Location] = nil
	case kind.Counts():
		r.chooseForCounts(kind, &c)
	}
	return c, err
}

// chooseForCounts leaves out patterns among counts, unless the set was asked for.
func (r *ruleFlags) chooseForCounts(kind chart.Kind, c *choice) {
	taken, left := judged.CountRules(c.specs[chart.Location])
	const why = "counts go in steps and are skewed, so that the false alarms of these rules would not be their nominal ones"
	switch asked := r.location != ""; {
	case len(left) == 0:
	case asked:
		c.cautions = append(c.cautions, fmt.Sprintf("Watching a chart of kind %s: %s; %s.", kind, strings.Join(left, ", "), why))
	default:
		c.specs[chart.Location] = taken
		c.cautions = append(c.cautions, fmt.Sprintf("Not used: %s; %s. Name the set with --rules to use them all the same.", strings.Join(left, ", "), why))
	}
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
	if !kind.Has(chart.Location) && len(taken) == 0 {
		return fmt.Errorf("--rules %s: none of its rules suits a dispersion trace, the only one of kind %s", cmp.Or(r.location, rules.DefaultSet), kind)
	}
	c.specs[chart.Dispersion] = taken
	if len(left) > 0 {
		why := "its statistics are skewed"
		switch {
		case kind == chart.Individuals:
			why += " and neighbouring moving ranges share a value"
		case kind.Duplicates():
			why += " and come from different samples in no order that means anything"
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
