package server

import (
	"encoding/json"
	"fmt"
	"net/url"
	"slices"
	"strings"

	"limitary/api"
)

// queryTable holds the query parameters of every REST call, by method and path pattern, as the OpenAPI document lists
// them. What is documented and what is taken are thus the same.
type queryTable map[string][]string

func newQueryTable() (queryTable, error) {
	var doc struct {
		Paths map[string]map[string]struct {
			Parameters []struct{ Name, In string }
		}
	}
	if err := json.Unmarshal(api.OpenAPI, &doc); err != nil {
		return nil, fmt.Errorf("OpenAPI document: %w", err)
	}
	t := queryTable{}
	for path, methods := range doc.Paths {
		for method, operation := range methods {
			names := []string{}
			for _, p := range operation.Parameters {
				if p.In == "query" {
					names = append(names, p.Name)
				}
			}
			t[routeKey(method, path)] = names
		}
	}
	return t, nil
}

func routeKey(method, pattern string) string {
	return strings.ToUpper(method) + " " + strings.ReplaceAll(pattern, "=*}", "}")
}

// unknown names a query parameter that the call does not have, "" where all are known. Names may be written as in the
// contract (page_size) or as in its JSON (pageSize).
func (t queryTable) unknown(method, pattern string, given url.Values) (parameter string, known []string) {
	known = t[routeKey(method, pattern)]
	var wrong []string
	for name := range given {
		if !slices.Contains(known, camel(name)) {
			wrong = append(wrong, name)
		}
	}
	if len(wrong) == 0 {
		return "", known
	}
	return slices.Min(wrong), known
}

// camel turns page_size into pageSize.
func camel(name string) string {
	var b strings.Builder
	up := false
	for _, r := range name {
		switch {
		case r == '_':
			up = true
			continue
		case up && 'a' <= r && r <= 'z':
			r += 'A' - 'a'
		}
		up = false
		b.WriteRune(r)
	}
	return b.String()
}
