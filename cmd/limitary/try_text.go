package main

import (
	"io"
	"text/template"
	"time"

	"limitary/internal/demo"
)

// tryText is what the text for the newcomer is made of.
type tryText struct {
	HTTP, GRPC, Data string
	Tokens           map[string]string
	Summary          demo.Summary
	Now              time.Time
}

// Example names the result that the calls post and explain: a new one at each start.
func (t tryText) Example() string { return "TRY-" + t.Now.UTC().Format("20060102-150405") }

// Measured is when it was measured.
func (t tryText) Measured() string { return t.Now.Format(time.RFC3339) }

// Poster and Reviewer are the tokens that the calls use.
func (t tryText) Poster() string { return t.Tokens[demoLIMS] }

// Reviewer reads and decides.
func (t tryText) Reviewer() string { return t.Tokens[demoReviewer] }

// Sheet is an address that any cell can fetch: its key can only read.
func (t tryText) Sheet() string {
	return t.HTTP + "/sheet/limit/nitrate-ic2-mid/upper_action?key=" + t.Tokens[demoSheet]
}

// Keys lists who has which.
func (t tryText) Keys() []tryKey {
	var out []tryKey
	for _, d := range demoRoles {
		out = append(out, tryKey{d.principal, d.does, t.Tokens[d.principal]})
	}
	return out
}

type tryKey struct{ Principal, Does, Token string }

// Days is how long the keys live.
func (t tryText) Days() int { return int(demoKeyLife.Hours() / 24) }

// The calls carry their key, so that each can be pasted into any shell by itself.
var tryTemplate = template.Must(template.New("try").Parse(`
Limitary is running{{if .Summary.Already}}, with everything that was there before{{end}}. The laboratories of Fellmark Water, an invented group, have
{{.Summary.Charts}} charts, {{.Summary.Results}} control results, {{.Summary.SignalsOpen}} open signals, {{.Summary.TracksHeld}} of {{.Summary.Tracks}} tracks on hold and {{.Summary.VersionsProposed}} version of limits waiting for approval.

  REST   {{printf "%-30s" .HTTP}}   the OpenAPI document is at /openapi.json
  gRPC   {{printf "%-30s" .GRPC}}   with reflection
{{- if .Data}}
  data   {{printf "%-30s" .Data}}   kept between starts; to begin anew, stop and delete it
{{- end}}

Fresh keys, valid for {{.Days}} days:
{{range .Keys}}
  {{printf "%-14s" .Principal}} {{.Does}}
    {{.Token}}
{{- end}}

Three calls to try, from another terminal. They answer in JSON on one line; "| jq ." makes it readable.

1. Post a control result and read its verdict at once. This nitrate standard came out too high:

curl -sS -w '\n' {{.HTTP}}/v1/results:post \
  -H 'Authorization: Bearer {{.Poster}}' \
  -d '{"results": [{"chart": "nitrate-ic2-mid", "source": "lims-harwick", "sourceId": "{{.Example}}",
       "measuredAt": "{{.Measured}}", "readings": ["5.241"], "unit": "mg/L"}]}'

2. See why: the points, lines and arithmetic behind that verdict, and what to look at first:

curl -sS -w '\n' '{{.HTTP}}/v1/charts/nitrate-ic2-mid/results:explain?source=lims-harwick&sourceId={{.Example}}' \
  -H 'Authorization: Bearer {{.Reviewer}}'

3. List the open signals of the group, newest first:

curl -sS -w '\n' '{{.HTTP}}/v1/signals?labels=group=fellmark-water&statuses=SIGNAL_STATUS_OPEN' \
  -H 'Authorization: Bearer {{.Reviewer}}'

In a browser, or in a spreadsheet as =NUMBERVALUE(WEBSERVICE("..."),"."), the upper action limit in force:

{{.Sheet}}

For formulas of other programs, macros and a workbook that asks by itself: {{.HTTP}}/sheet/kit

All data here are invented. A signal is statistical evidence about the measuring process, not a compliance, release or
safety decision, and a clear standing does not mean that a result is right. Every explanation carries the full text.

Serving until stopped with Ctrl-C.
`))

// printTry tells the newcomer what there is and what to do with it.
func printTry(w io.Writer, t tryText) error { return tryTemplate.Execute(w, t) }
