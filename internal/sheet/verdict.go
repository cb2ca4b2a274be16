package sheet

import (
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/block"
)

// verdict answers with what the judge says of one or more values.
func (h *Handler) verdict(r *request) (*answer, error) {
	t := trial{chart: r.chart(), lot: r.query.Get("lot")}
	var err error
	if t.alone, err = r.flag("alone", false); err != nil {
		return nil, err
	}
	if t.version, err = r.version(); err != nil {
		return nil, err
	}
	inspected, err := r.inspected()
	if err != nil {
		return nil, err
	}
	groups, err := r.groups(inspected != "")
	if err != nil {
		return nil, err
	}
	for _, group := range groups {
		p, err := pointOf(group, inspected, r.query.Get("material"))
		if err != nil {
			return nil, err
		}
		t.points = append(t.points, p)
	}
	j, err := h.try(r.ctx(), t)
	if err != nil {
		return nil, err
	}
	return textAnswer(j.line(t.alone)), nil
}

// line is the verdict in one line.
func (j judged) line(alone bool) string {
	parts := []string{"not recorded"}
	var points, rules []string
	for _, v := range j.result.Verdicts {
		points = append(points, standingWord(v.Standing, v.Reason))
		if hit := rulesHit(v); hit != "" {
			rules = append(rules, hit)
		}
	}
	if len(points) == 1 {
		parts = append(parts, points[0])
	} else {
		parts = append(parts, standingWord(j.result.Standing, pb.NotJudgedReason_NOT_JUDGED_REASON_UNSPECIFIED), "points "+strings.Join(points, " "))
	}
	if len(rules) > 0 {
		parts = append(parts, "rules "+strings.Join(rules, ", "))
	}
	parts = append(parts, "version "+j.version(), "track "+stateWord(j.track.TrackState), j.afterText(alone))
	return strings.Join(parts, "; ")
}

// groups reads value= or values= as decimal texts with a point, one group a result; counts says what the numbers are.
func (r *request) groups(counts bool) ([][]string, error) {
	one, many := r.query.Get("value"), r.query.Get("values")
	var texts [][]string
	switch {
	case (one == "") == (many == ""):
		return nil, refuse("give value= for one result, or values= for several, not both")
	case one != "":
		if strings.Contains(one, "|") {
			return nil, refuse("value=%s: is one result; values= takes several", clip(one))
		}
		texts = [][]string{strings.Split(one, ";")}
	case strings.Contains(many, "|"):
		for group := range strings.SplitSeq(many, "|") {
			texts = append(texts, strings.Split(group, ";"))
		}
	default:
		for each := range strings.SplitSeq(many, ";") {
			texts = append(texts, []string{each})
		}
	}
	if len(texts) > ValuesMax {
		return nil, refuse("values=: %d results, the limit is %d; POST them to /sheet/judge/", len(texts), ValuesMax)
	}
	return texts, r.normalise(texts, counts)
}

// inspected is how much was inspected for the counts, "" where the values are readings.
func (r *request) inspected() (string, error) {
	text := strings.TrimSpace(r.query.Get("inspected"))
	if text == "" {
		return "", nil
	}
	groups := [][]string{{text}}
	err := r.normalise(groups, true)
	return groups[0][0], err
}

// normalise gives the numbers of all groups the decimal point, by one decimal for all.
func (r *request) normalise(groups [][]string, counts bool) error {
	decimal, err := r.decimal()
	if err != nil {
		return err
	}
	d := block.Dialect{Delimiter: block.Comma, Decimal: decimal}
	var cells []block.Cell
	for _, g := range groups {
		for _, text := range g {
			if strings.TrimSpace(text) == "" {
				return refuse("a value is empty")
			}
			cells = append(cells, block.Cell{Text: text, Count: counts})
		}
	}
	if err := d.SettleDecimal(cells); err != nil {
		return err
	}
	for _, g := range groups {
		for i, text := range g {
			if g[i], err = d.Number(text); err != nil {
				return asRefusal(err)
			}
		}
	}
	return nil
}
