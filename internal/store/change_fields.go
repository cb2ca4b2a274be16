package store

import (
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"limitary/internal/chart"
	"limitary/internal/definition"
)

// fieldChanges says what a change would set: whoever confirms it must see it.
func fieldChanges(kind string, proposed, current []byte) ([]FieldChange, error) {
	switch kind {
	case "ADD_MARK":
		var f markForm
		if err := json.Unmarshal(proposed, &f); err != nil {
			return nil, errors.New("store: stored mark: " + err.Error())
		}
		return []FieldChange{{"at", "", f.At.Format(time.RFC3339Nano)}, {"lot", "", f.Lot}, {"text", "", f.Text},
			{"break", "", fmt.Sprint(f.Break)}, {"restart", "", fmt.Sprint(f.Restart)}}, nil
	case "AMEND_RESULT":
		from, err := decodeContent(current)
		if err != nil {
			return nil, err
		}
		to, err := decodeContent(proposed)
		return resultFields(from, to), err
	case "VOID_RESULT":
		from, err := decodeContent(current)
		return []FieldChange{{"voided", "false", "true"}, {"readings", strings.Join(from.Readings, " ") + countText(from.Count), ""}}, err
	}
	return nil, nil
}

// resultFields lists the fields in which two contents of a result differ.
func resultFields(from, to definition.Result) (list []FieldChange) {
	add := func(field, a, b string) {
		if a != b {
			list = append(list, FieldChange{field, a, b})
		}
	}
	add("measured_at", from.MeasuredText, to.MeasuredText)
	add("lot", from.Lot, to.Lot)
	add("run_id", from.RunID, to.RunID)
	add("position", fmt.Sprint(from.Position), fmt.Sprint(to.Position))
	add("replicate", fmt.Sprint(from.Replicate), fmt.Sprint(to.Replicate))
	add("role", roleNames[from.Role], roleNames[to.Role])
	add("repeat_of", from.RepeatOf, to.RepeatOf)
	add("readings", strings.Join(from.Readings, " "), strings.Join(to.Readings, " "))
	add("count", countText(from.Count), countText(to.Count))
	add("material", from.Material, to.Material)
	add("analyst", from.Analyst, to.Analyst)
	add("instrument", from.Instrument, to.Instrument)
	add("labels", labelText(from.Labels), labelText(to.Labels))
	return list
}

func countText(c *chart.Count) string {
	if c == nil {
		return ""
	}
	return fmt.Sprintf("%v of %v", c.Nonconforming, c.Inspected)
}

var roleNames = map[definition.Role]string{definition.Routine: "ROUTINE", definition.Repeat: "REPEAT", definition.Overlap: "OVERLAP", definition.Setup: "SETUP"}

func labelText(labels map[string]string) string {
	var parts []string
	for _, k := range slices.Sorted(maps.Keys(labels)) {
		parts = append(parts, k+"="+labels[k])
	}
	return strings.Join(parts, " ")
}
