package main

import (
	"path/filepath"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
)

// Counts, materials and scales go from files through a running service and come back as the same limits that compute
// gives for the same files.
func TestEveryKindThroughTheService(t *testing.T) {
	dir := traversableDir(t)
	address, _ := serveInBackground(t, "--data", dir)
	key := func(name, role string) string {
		t.Helper()
		return strings.TrimSpace(shell(t, "", "key", "create", "--data", dir, "--name", name, "--role", role).want(t, exitOK).out)
	}
	author, approver, poster := key("ann", "author"), key("bea", "approver"), key("lims", "poster")
	on := func(token string, args ...string) ran { return shell(t, token, append(args, "--server", address)...) }
	file := func(name string) string { return filepath.Join(kindsDir, name) }
	const effective = "2026-06-01T00:00:00Z"

	on(author, "chart", "create", "failed", "--kind", "p", "--unit", "1").want(t, exitOK, "p, subgroup size 1")
	sent := []string{"version", "propose", "failed", "--file", file("plates-failed.csv"), "--value", "failed", "--inspected", "plates", "--count-method", "exact",
		"--rules", "shewhart-1931", "--reason", "first", "--effective-from", effective}
	on(author, sent...).want(t, exitOK, "rests on        40 samples", "Every sample has lines of its own", "TAIL_PROBABILITY", "What lies beyond the lines", "PROPOSED")
	on(author, append(sent, "--bands", "0,1")...).want(t, exitFailure, "InvalidArgument")
	var v pb.GetVersionResponse
	decode(t, on(approver, "version", "show", "failed", "1", "--json").want(t, exitOK).out, &v)
	var computed pb.ComputeLimitsResponse
	decode(t, mustRun(t, "", "compute", "--json", "--kind", "p", "--value", "failed", "--inspected", "plates", "--count-method", "exact", file("plates-failed.csv")), &computed)
	if a, b := v.Version.Location.GetUpperAction().GetValue(), computed.Location.GetUpperAction().GetValue(); a != b {
		t.Errorf("upper action line: the version has %v, compute gives %v", a, b)
	}
	on(approver, "version", "approve", "failed", "1", "--digest", v.Version.Digest).want(t, exitOK, "APPROVED")
	results := writeFile(t, "later.csv", "when,id,bad,n\n2026-06-02T08:00:00Z,f1,18,400\n2026-06-03T08:00:00Z,f2,60,400\n2026-06-04T08:00:00Z,f3,9,8\n")
	post := []string{"post", results, "--chart", "failed", "--source", "lims", "--id", "id", "--time", "when", "--value", "bad", "--inspected", "n"}
	on(poster, post...).want(t, exitFailure, "2 ACCEPTED", "1 REFUSED", "CLEAR", "STOP", "more than the 8 items inspected")

	on(author, "chart", "create", "lead", "--kind", "individuals", "--unit", "ug/L", "--standardised", "--relevant-shift", "0.7", "--relevant-ratio", "1.5").
		want(t, exitOK, "by the level of the material", "a difference up to 0.7 sigmas, a ratio up to 1.5")
	levels := []string{"--level", "low=2.5,0.1", "--level", "mid=10,0.3", "--level", "high=40,1"}
	on(author, append([]string{"version", "propose", "lead", "--file", file("lead-levels.csv"), "--value", "lead_ug_per_L", "--material", "material",
		"--rules", "action-warning", "--reason", "first", "--effective-from", effective}, levels...)...).want(t, exitOK, "Judged scale", "low", "mid", "high")
	decode(t, on(approver, "version", "show", "lead", "1", "--json").want(t, exitOK).out, &v)
	on(approver, "version", "approve", "lead", "1", "--digest", v.Version.Digest).want(t, exitOK)
	results = writeFile(t, "lead.csv", "when,id,what,lead\n2026-06-02T08:00:00Z,l1,low,2.5\n2026-06-03T08:00:00Z,l2,high,46\n")
	post = []string{"post", results, "--chart", "lead", "--source", "lims", "--id", "id", "--time", "when", "--value", "lead", "--material-column", "what"}
	on(poster, post...).want(t, exitOK, "2 ACCEPTED", "CLEAR", "STOP")
	on(poster, append(post, "--material", "low")...).want(t, exitUsage, "both say the material")
	on(poster, append(post[:len(post)-1], "wat")...).want(t, exitFailure, "did you mean --material-column \"what\"?")
}

// The second proposal says whether the first should be kept.
func TestVersionShowTellsTheChangeTest(t *testing.T) {
	dir := traversableDir(t)
	address, _ := serveInBackground(t, "--data", dir)
	key := func(name, role string) string {
		return strings.TrimSpace(shell(t, "", "key", "create", "--data", dir, "--name", name, "--role", role).want(t, exitOK).out)
	}
	author, approver := key("ann", "author"), key("bea", "approver")
	on := func(token string, args ...string) ran { return shell(t, token, append(args, "--server", address)...) }
	on(author, "chart", "create", "nitrate", "--kind", "individuals", "--unit", "mg/L").want(t, exitOK)
	propose := func(file, effective string, more ...string) ran {
		return on(author, append([]string{"version", "propose", "nitrate", "--file", filepath.Join(kindsDir, file), "--rules", "action-warning", "--reason", "due",
			"--effective-from", effective}, more...)...)
	}
	propose("nitrate-2025.csv", "2026-01-01T00:00:00Z").want(t, exitOK, "False alarms to be expected")
	var v pb.GetVersionResponse
	decode(t, on(approver, "version", "show", "nitrate", "1", "--json").want(t, exitOK).out, &v)
	on(approver, "version", "approve", "nitrate", "1", "--digest", v.Version.Digest).want(t, exitOK)
	propose("nitrate-2026.csv", "2027-01-01T00:00:00Z", "--after-signal").
		want(t, exitOK, "Limits in force, version 1: CHANGE", "centre, sigmas away", "NOT VALID")
}

func decode(t *testing.T, text string, into protoMessage) {
	t.Helper()
	if err := protojson.Unmarshal([]byte(text), into); err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
}
