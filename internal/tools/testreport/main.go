// Command testreport runs go test over packages and says honestly what passed: it prints each package as it ends, the
// output of what failed, and last a line "N passed, N failed, N skipped". A skipped test is shown with its reason, and
// fails the run of root, who can run them all; a package that does not build, or whose TestMain ends without running its
// tests, is a failure too.
//
// Use: testreport [go test flags and packages]
package main

import (
	"bufio"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"os/exec"
	"strings"
)

// event is a line of go test -json.
type event struct {
	Action, Package, Test, Output string
	ImportPath                    string
	Elapsed                       float64
}

type report struct {
	passed, failed, skipped int
	// output by package and test, kept until it is known whether anyone needs it.
	output map[string]*strings.Builder
	ran    map[string]int
}

func main() {
	cmd := exec.Command("go", append([]string{"test", "-json"}, os.Args[1:]...)...)
	cmd.Stderr = os.Stderr
	out, err := cmd.StdoutPipe()
	if err == nil {
		err = cmd.Start()
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "testreport:", err)
		os.Exit(2)
	}
	r := &report{output: map[string]*strings.Builder{}, ran: map[string]int{}}
	r.read(out)
	if err := cmd.Wait(); err != nil && r.failed == 0 {
		r.failed++
		fmt.Println("go test:", err)
	}
	fmt.Printf("%d passed, %d failed, %d skipped\n", r.passed, r.failed, r.skipped)
	if r.failed > 0 || r.passed == 0 || r.skipped > 0 && os.Geteuid() == 0 {
		os.Exit(1)
	}
}

func (r *report) read(out io.Reader) {
	lines := bufio.NewScanner(out)
	lines.Buffer(make([]byte, 1<<20), 1<<26)
	for lines.Scan() {
		var e event
		if json.Unmarshal(lines.Bytes(), &e) != nil {
			fmt.Println(lines.Text())
			continue
		}
		r.take(e)
	}
}

func (r *report) take(e event) {
	key := e.Package + " " + e.Test
	switch e.Action {
	case "build-output":
		fmt.Print(e.Output)
	case "output":
		if r.output[key] == nil {
			r.output[key] = &strings.Builder{}
		}
		r.output[key].WriteString(e.Output)
	case "pass", "fail", "skip":
		if e.Test == "" {
			r.packageDone(e, key)
		} else {
			r.testDone(e, key)
		}
		delete(r.output, key)
	}
}

func (r *report) testDone(e event, key string) {
	switch e.Action {
	case "pass":
		r.passed++
		r.ran[e.Package]++
	case "skip":
		r.skipped++
		fmt.Printf("SKIP %s\n%s", key, r.text(key))
	case "fail":
		r.failed++
		r.ran[e.Package]++
		fmt.Printf("FAIL %s\n%s", key, r.text(key))
	}
}

func (r *report) packageDone(e event, key string) {
	switch {
	case e.Action == "fail":
		r.failed++
		fmt.Printf("FAIL %s (%.1f s)\n%s", e.Package, e.Elapsed, r.text(key))
	case e.Action == "skip" || strings.Contains(r.text(key), "[no test files]"):
		fmt.Printf("none %s: no test files\n", e.Package)
	case r.ran[e.Package] == 0 && !strings.Contains(r.text(key), "[no tests to run]"):
		r.failed++
		fmt.Printf("FAIL %s: said ok and ran no test\n%s", e.Package, r.text(key))
	default:
		fmt.Printf("ok   %s: %d tests, %.1f s\n", e.Package, r.ran[e.Package], e.Elapsed)
	}
}

func (r *report) text(key string) string {
	if b := r.output[key]; b != nil {
		return b.String()
	}
	return ""
}
