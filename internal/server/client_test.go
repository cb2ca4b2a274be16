package server_test

import (
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"reflect"
	"testing"

	"limitary/internal/server"
)

// TestAClientThatIsNotGoWalksTheMainJob runs testdata/client/walk.mjs under Node with its own gRPC library.
func TestAClientThatIsNotGoWalksTheMainJob(t *testing.T) {
	node, err := exec.LookPath("node")
	if err != nil {
		t.Fatal("Node.js is needed, on Debian the package nodejs: ", err)
	}
	libraries, err := filepath.Abs("../tools/node/package.json")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(filepath.Join(filepath.Dir(libraries), "node_modules", "@grpc", "grpc-js")); err != nil {
		t.Fatal("the client's libraries are missing, \"npm --prefix internal/tools/node ci\" installs them: ", err)
	}
	f := newFixture(t, server.Options{})
	tokens, err := json.Marshal(f.tokens)
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.CommandContext(t.Context(), node, "testdata/client/walk.mjs", f.server.GRPCAddress(), "../../proto", libraries)
	cmd.Env = append(os.Environ(), "TOKENS="+string(tokens))
	cmd.Stderr = os.Stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	var got map[string]any
	if err := json.Unmarshal(out, &got); err != nil {
		t.Fatalf("%v in %s", err, out)
	}
	accepted := make([]any, 10)
	for i := range accepted {
		accepted[i] = "POST_OUTCOME_ACCEPTED"
	}
	want := map[string]any{
		"setUp": accepted,
		// By hand: moving ranges 0.2 0.3 0.2 0.3 0.2 0.3 0.4 0.2 0.2, their mean 2.3/9 over d2 = 1.128379 is 0.226479.
		"processSigma": 0.2265,
		"refused":      "PERMISSION_DENIED",
		"state":        "VERSION_STATE_APPROVED",
		"standings":    []any{"STANDING_CLEAR", "STANDING_STOP"},
		"again":        []any{"POST_OUTCOME_DUPLICATE", "POST_OUTCOME_DUPLICATE"},
		"signals":      []any{[]any{"western-electric-1956/1", "SIDE_UPPER", "n14"}},
		"completed":    []any{"western-electric-1956/1"},
		"held":         "TRACK_STATE_HOLD",
		"released":     "TRACK_STATE_CLEAR",
	}
	if n, _ := got["sentences"].(float64); n < 5 {
		t.Errorf("the explanation has %v sentences", got["sentences"])
	}
	delete(got, "sentences")
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got  %v\nwant %v", got, want)
	}
}
