package server_test

import (
	"context"
	"encoding/json"
	"os"
	"slices"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"

	"limitary/internal/server"
)

// TestRolesOpenTheirMethodsAndNoOthers calls every method as every role over both transports. Who may call what stands in
// testdata/roles.json, written from the contract and not from the table it checks.
func TestRolesOpenTheirMethodsAndNoOthers(t *testing.T) {
	data, err := os.ReadFile("testdata/roles.json")
	if err != nil {
		t.Fatal(err)
	}
	var allowed map[string][]string
	if err := json.Unmarshal(data, &allowed); err != nil {
		t.Fatal(err)
	}
	f := newFixture(t, server.Options{})
	rules := gatewayRules(t)
	if len(rules) != len(allowed) {
		t.Errorf("the contract has %d methods, the file %d", len(rules), len(allowed))
	}
	roles := []string{"reader", "poster", "author", "approver", "reviewer", "admin"}
	for call := range rules {
		who, known := allowed[call]
		if !known {
			t.Errorf("%s is not in the file", call)
			continue
		}
		for _, over := range f.transports(t) {
			for _, role := range roles {
				got, err := over.call(context.Background(), role, call, rules[call].least())
				if err != nil {
					t.Fatalf("%s %s as %s: %v", over.name(), call, role, err)
				}
				refused := got.code == codes.PermissionDenied && got.reason == "ERROR_REASON_ROLE_MISSING"
				if want := len(who) > 0 && !slices.Contains(who, role); refused != want {
					t.Errorf("%s %s as %s: got %s %s, want refused %t", over.name(), call, role, got.code, got.reason, want)
				}
				if refused && !strings.Contains(got.message, who[0]) {
					t.Errorf("%s %s as %s: the text does not name the role %s: %s", over.name(), call, role, who[0], got.message)
				}
			}
		}
	}
}

// least is a request with nothing but what a path needs.
func (g gatewayRule) least() []byte {
	fields := map[string]any{}
	for _, m := range pathField.FindAllStringSubmatch(g.path, -1) {
		fields[camelCase(m[1])] = "1" // a name, and a number as JSON writes large ones
	}
	b, err := json.Marshal(fields)
	if err != nil {
		panic(err) // texts always encode
	}
	return b
}
