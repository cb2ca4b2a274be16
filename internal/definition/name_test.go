package definition_test

import (
	"errors"
	"strings"
	"testing"
	"time"

	"limitary/internal/definition"
)

// unseen are texts that look like "lims" and are another. The categories are those of the Unicode Character Database.
var unseen = map[string]string{
	"a space before":             " lims",
	"a space after":              "lims ",
	"a no-break space after":     "lims\u00a0",
	"a zero width space":         "li\u200bms", // Cf
	"a soft hyphen":              "li\u00adms", // Cf
	"a byte order mark":          "\ufefflims", // Cf
	"a right-to-left mark":       "lims\u200f", // Cf
	"a line separator":           "li\u2028ms", // Zl
	"a paragraph separator":      "li\u2029ms", // Zp
	"a tab":                      "li\tms",     // Cc
	"a control character of C1":  "li\u0085ms", // Cc
	"nothing but a space":        " ",
	"nothing but a joiner":       "\u200d", // Cf
	"a tag character at the end": "lims\U000e0041",
}

func TestNamesThatLookAlikeAreRefused(t *testing.T) {
	for name, text := range unseen {
		var e *definition.Error
		if err := definition.CheckName("source", text, 1, 200); !errors.As(err, &e) || e.Reason != definition.InvalidField || e.Field != "source" {
			t.Errorf("%s: got %v, want source refused", name, err)
		}
	}
	for _, text := range []string{"lims", "Harwick LIMS", "Bänk 3", "試薬 7", "a-b_c/d.e", ""} {
		if err := definition.CheckName("lot", text, 0, 200); err != nil {
			t.Errorf("%q: got %v, want it taken", text, err)
		}
	}
	if err := definition.CheckName("lot", strings.Repeat("x", 201), 0, 200); err == nil {
		t.Error("201 bytes are taken, the limit is 200")
	}
}

func TestEveryNameOfAResultAndAKeyIsChecked(t *testing.T) {
	now := time.Date(2026, 3, 2, 8, 0, 0, 0, time.UTC)
	chart := definition.Chart{Name: "nitrate", SubgroupSize: 1, Unit: "mg/L"}
	for field, set := range map[string]func(*definition.Result, string){
		"source":       func(r *definition.Result, s string) { r.Source = s },
		"source_id":    func(r *definition.Result, s string) { r.SourceID = s },
		"lot":          func(r *definition.Result, s string) { r.Lot = s },
		"run_id":       func(r *definition.Result, s string) { r.RunID = s },
		"repeat_of":    func(r *definition.Result, s string) { r.Role, r.RepeatOf = definition.Repeat, s },
		"labels":       func(r *definition.Result, s string) { r.Labels = map[string]string{s: "v"} },
		"labels[site]": func(r *definition.Result, s string) { r.Labels = map[string]string{"site": s} },
	} {
		for text, taken := range map[string]bool{"abc": true, "abc ": false, "a\u200bbc": false} {
			r := definition.Result{Chart: "nitrate", Source: "lims", SourceID: "r1", MeasuredAt: now, Readings: []string{"10"}}
			set(&r, text)
			_, err := r.Prepare(chart, now)
			var e *definition.Error
			if taken && err != nil || !taken && (!errors.As(err, &e) || e.Field != field) {
				t.Errorf("%s %q: got %v, want it taken: %t", field, text, err, taken)
			}
		}
	}
	for field, set := range map[string]func(*definition.Key, string){
		"principal":    func(k *definition.Key, s string) { k.Principal = s },
		"sources[0]":   func(k *definition.Key, s string) { k.Sources = []string{s} },
		"labels[site]": func(k *definition.Key, s string) { k.Labels = map[string]string{"site": s} },
	} {
		for text, taken := range map[string]bool{"ann": true, " ann": false, "ann\u200d": false} {
			k := definition.Key{Principal: "ann", Roles: definition.Permissions, ExpiresAt: now.Add(time.Hour)}
			set(&k, text)
			err := k.Check(now)
			var e *definition.Error
			if taken && err != nil || !taken && (!errors.As(err, &e) || e.Field != field) {
				t.Errorf("%s %q: got %v, want it taken: %t", field, text, err, taken)
			}
		}
	}
}
