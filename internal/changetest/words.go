package changetest

import (
	"fmt"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// finish adds what depends on how the comparison came about, and the words.
func (res *Result) finish(req *Request) {
	res.Decision = Keep
	for _, c := range res.Figures() {
		switch {
		case c.Decision == Change:
			res.Decision = Change
		case c.Decision == NotEnoughData && res.Decision == Keep:
			res.Decision = NotEnoughData
		}
		c.PValid, c.PReason = validity(c, req)
	}
	things := noun(req.InForce.Kind)
	if res.Centre != nil {
		res.Centre.Sentence = res.Centre.sentence("centre", "%.2f sigmas", things)
	}
	spread := "spread"
	if res.Means != nil {
		spread = "spread within subgroups"
		res.Means.Sentence = res.Means.sentence("spread of the subgroup means", "%.2f times the old", things)
	}
	if req.InForce.Kind.Duplicates() {
		spread = "spread within duplicates"
	}
	if res.Spread != nil {
		res.Spread.Sentence = res.Spread.sentence(spread, "%.2f times the old", things)
	}
	res.Sentence = res.overall(req, things)
}

func validity(c *Comparison, req *Request) (bool, string) {
	switch {
	case c.Test == nil:
		return false, "There is no test, because there is no interval."
	case req.Trigger == AfterSignal:
		return false, "The results were chosen because they looked bad, so a small p is no evidence: it would be small after many a false alarm too."
	}
	return true, ""
}

// sentence says what was decided on one figure and why; format writes an amount of it.
func (c *Comparison) sentence(name, format, things string) string {
	amount := func(x float64) string { return fmt.Sprintf(format, x) }
	var b strings.Builder
	switch c.Decision {
	case Keep:
		fmt.Fprintf(&b, "Keep the %s: ", name)
	case Change:
		fmt.Fprintf(&b, "Change the %s: ", name)
	default:
		fmt.Fprintf(&b, "There are not enough data on the %s: ", name)
	}
	b.WriteString(c.finding(name, amount))
	b.WriteString(c.neededSentence(things))
	b.WriteString(c.publishedSentence(amount))
	return b.String()
}

func (c *Comparison) finding(name string, amount func(float64) string) string {
	switch c.Reason {
	case TooFew:
		return fmt.Sprintf("too few of the new results tell of it; an interval needs %d or more.", GroupsMin)
	case NoSpread:
		return "the new results give a spread of zero, which no process has; they are equal, or reported too coarsely."
	case TooCorrelated:
		return "the results follow each other so closely that hardly any independent ones are left; look for a drift or a step."
	}
	text := fmt.Sprintf("the new %s is %s, with a 95 %% interval of %s, ", name, differs(c, amount), span(c.Interval, amount))
	limit := fmt.Sprintf("what matters begins outside %s", span(&c.Relevance, amount))
	switch {
	case c.Decision == Keep && c.Differs:
		return text + "so there is a difference, too small to matter; " + limit + "."
	case c.Decision == Keep:
		return text + "all of which is too small to matter; " + limit + "."
	case c.Decision == Change:
		return text + "all of which matters; " + limit + "."
	case c.Differs:
		return text + "so there is a difference, and whether it matters is open; " + limit + "."
	}
	return text + "which holds both no difference and one that matters; " + limit + "."
}

// publishedSentence speaks where the figure as it stands gives an answer that the whole comparison does not.
func (c *Comparison) publishedSentence(amount func(float64) string) string {
	if c.Decision != NotEnoughData || c.Published == nil || c.Published.Decision == NotEnoughData {
		return ""
	}
	fits := "fits"
	if c.Published.Decision == Change {
		fits = "does not fit"
	}
	return fmt.Sprintf(" Taken as it is published, whatever error its basis left in it, the figure in force %s the new results: %s.", fits, span(c.Published.Interval, amount))
}

func differs(c *Comparison, amount func(float64) string) string {
	if c.Relevance.Lower < 0 { // a difference, not a ratio
		return amount(*c.Estimate) + " from the one in force"
	}
	return amount(*c.Estimate)
}

func span(in *limits.Interval, amount func(float64) string) string {
	lower, _, _ := strings.Cut(amount(in.Lower), " ")
	return lower + " to " + amount(in.Upper)
}

// neededSentence tells how many results would settle what is open; where the old basis stands against it, for the figure
// as published.
func (c *Comparison) neededSentence(things string) string {
	if c.Needed == nil {
		return ""
	}
	plan := "about %d new %s in all would settle it, if the rest looks like these."
	if c.Reason == TooFew {
		plan = "about %d new %s would show that nothing has changed, if so it is."
	}
	if c.Needed.Reachable {
		return " A" + fmt.Sprintf(plan, c.Needed.Groups, things)[1:]
	}
	published := c.Published.Needed
	switch {
	case published == nil: // settled, and said by publishedSentence
		return " The old basis is too small for any number of new ones to settle it."
	case published.Reachable:
		return " The old basis is too small for any number of new ones to settle it. For the figure as it is published, " + fmt.Sprintf(plan, published.Groups, things)
	}
	return fmt.Sprintf(" No number of new %s up to %d would settle it: the difference lies at the limit of what matters.", things, NeededMax)
}

// overall sums up, and tells what speaks against trusting the sum.
func (res *Result) overall(req *Request, things string) string {
	var b strings.Builder
	switch res.Decision {
	case Keep:
		b.WriteString("Keep the limits: nothing that matters has changed.")
	case Change:
		b.WriteString("Change the limits, once the cause is understood: something that matters has changed.")
	default:
		b.WriteString("The new results do not decide whether to keep the limits; go on with those in force.")
	}
	fmt.Fprintf(&b, " New %s compared: %d", things, res.Groups)
	switch kind := req.InForce.Kind; {
	case kind.Items():
		fmt.Fprintf(&b, " (%.10g items)", res.Inspected)
	case kind.Counts():
		fmt.Fprintf(&b, " (%.6g inspection units)", res.Inspected)
	case kind != chart.Individuals:
		fmt.Fprintf(&b, " (%d readings)", res.Readings)
	}
	fmt.Fprintf(&b, "; left out: %d of the old basis, %d excluded.", res.BasisLeftOut, res.ExcludedLeftOut)
	b.WriteString(res.oneFigure(req.InForce.Kind))
	if res.Correlation.Used >= correlationTold {
		fmt.Fprintf(&b, " Neighbours are correlated (%.2f), so the centre counts as that of %.0f independent %s.", res.Correlation.Used, res.Correlation.EffectiveForCentre, things)
	}
	if req.Trigger == AfterSignal {
		b.WriteString(" It was made because of a signal, so the results lean towards a change; p-values are not valid.")
	}
	if res.Looks.Count > 1 {
		fmt.Fprintf(&b, " This is look %d in twelve months; the chance that the interval of at least one of them is wrong is up to %.0f %%.", res.Looks.Count, 100*res.Looks.OneWrongMax)
	}
	return b.String()
}

// oneFigure says what the one figure of a kind is.
func (res *Result) oneFigure(kind chart.Kind) string {
	switch {
	case kind.Duplicates():
		return " The one figure is the spread: each range over what the limits in force expect at its mean."
	case kind.Counts() && res.Dispersion > dispersionTold:
		return fmt.Sprintf(" The one figure is the centre; counts vary more than counting explains, so its variance is taken as %.2f times that.", res.Dispersion)
	case kind.Counts():
		return " The one figure is the centre, from which the scatter of counts follows."
	}
	return ""
}

// dispersionTold is the factor from which on it is mentioned, as a tenth of the samples at most are taken off below.
const dispersionTold = 1.1

// correlationTold is the correlation from which on it is mentioned: less takes off a tenth of the results at most. It is
// used all the same.
const correlationTold = 0.05
