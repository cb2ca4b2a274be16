package archtest_test

import (
	"encoding/json"
	"errors"
	"go/ast"
	"go/parser"
	"go/token"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"
)

const module = "limitary"

// listed is what the go command tells of a package.
type listed struct {
	ImportPath, Dir, Name, Doc string
	GoFiles, Imports, Deps     []string
	Standard                   bool
	Error                      *struct{ Err string }
}

// path is the package's path within the module.
func (p listed) path() string { return strings.TrimPrefix(p.ImportPath, module+"/") }

// packages lists the module's packages once.
var packages = sync.OnceValues(func() (all []listed, err error) {
	root, err := moduleRoot()
	if err != nil {
		return nil, err
	}
	cmd := exec.Command("go", "list", "-e", "-json=ImportPath,Dir,Name,Doc,GoFiles,Imports,Deps,Standard,Error", "./...", "./testdata") // ./... leaves testdata out
	cmd.Dir = root
	out, err := cmd.Output()
	if err != nil {
		var exit *exec.ExitError
		if errors.As(err, &exit) {
			return nil, errors.New(string(exit.Stderr))
		}
		return nil, err
	}
	for d := json.NewDecoder(strings.NewReader(string(out))); ; {
		var p listed
		if err := d.Decode(&p); err == io.EOF {
			return all, nil
		} else if err != nil {
			return nil, err
		}
		all = append(all, p)
	}
})

func moduleRoot() (string, error) {
	out, err := exec.Command("go", "env", "GOMOD").Output()
	return filepath.Dir(strings.TrimSpace(string(out))), err
}

func mustPackages(tb testing.TB) []listed {
	tb.Helper()
	all, err := packages()
	if err != nil {
		tb.Fatal(err)
	}
	if len(all) < 10 {
		tb.Fatalf("only %d packages listed", len(all))
	}
	return all
}

// covers reports whether a path or a tree ("x/...") holds a path.
func covers(pattern, path string) bool {
	if tree, ok := strings.CutSuffix(pattern, "/..."); ok {
		return path == tree || strings.HasPrefix(path, tree+"/")
	}
	return path == pattern
}

// within reports whether an import path is a package of a prefix or below it.
func within(prefixes []string, path string) bool {
	return slices.ContainsFunc(prefixes, func(p string) bool { return path == p || strings.HasPrefix(path, p+"/") })
}

// rowOf finds the row for a package: the longest pattern that covers it, a package before a tree.
func rowOf(path string) (found row, ok bool) {
	narrow := func(pattern string) int {
		if tree, isTree := strings.CutSuffix(pattern, "/..."); isTree {
			return 2 * len(tree)
		}
		return 2*len(pattern) + 1
	}
	for _, r := range table {
		if covers(r.pkg, path) && (!ok || narrow(r.pkg) > narrow(found.pkg)) {
			found, ok = r, true
		}
	}
	return found, ok
}

func isStandard(path string) bool {
	first, _, _ := strings.Cut(path, "/")
	return !strings.Contains(first, ".") && first != module
}

// problems lists what a package's direct imports and closure break of its row.
func problems(p listed, r row) (list []string) {
	for _, imported := range p.Imports {
		local, ours := strings.CutPrefix(imported, module+"/")
		switch {
		case ours && !slices.ContainsFunc(r.own, func(o string) bool { return covers(o, local) }):
			list = append(list, "imports "+local+", which is not in its row")
		case !ours && isStandard(imported) && within(r.refused, imported):
			list = append(list, "imports "+imported+": "+r.why)
		case !ours && !isStandard(imported) && !within(r.modules, imported):
			list = append(list, "imports "+imported+", a module that is not in its row")
		}
	}
	for _, dep := range p.Deps {
		if within(r.unreachable, dep) {
			list = append(list, "reaches "+dep)
		}
	}
	return list
}

func TestEveryPackageImportsOnlyWhatItsRowAllows(t *testing.T) {
	for _, p := range mustPackages(t) {
		t.Run(p.path(), func(t *testing.T) {
			r, ok := rowOf(p.path())
			if !ok {
				t.Fatal("has no row in the table; say there what it may import")
			}
			for _, problem := range problems(p, r) {
				t.Error(problem)
			}
		})
	}
}

func TestEveryRowNamesAPackage(t *testing.T) {
	all := mustPackages(t)
	exists := func(pattern string) bool {
		return slices.ContainsFunc(all, func(p listed) bool { return covers(pattern, p.path()) })
	}
	seen := map[string]bool{}
	for _, r := range table {
		switch {
		case seen[r.pkg]:
			t.Errorf("%s has two rows", r.pkg)
		case r.planned && exists(r.pkg):
			t.Errorf("%s exists: take the mark planned from its row, so that its vanishing is noticed", r.pkg)
		case !r.planned && !exists(r.pkg):
			t.Errorf("%s does not exist: its row rules nothing", r.pkg)
		}
		seen[r.pkg] = true
		for _, o := range r.own {
			planned := slices.ContainsFunc(table, func(other row) bool { return other.planned && other.pkg == o })
			if !planned && !exists(o) {
				t.Errorf("%s may import %s, which does not exist", r.pkg, o)
			}
		}
		if len(r.refused) > 0 && r.why == "" {
			t.Errorf("%s refuses %v without a reason", r.pkg, r.refused)
		}
	}
}

// TestTheRulesCanBeBroken shows that each kind of rule finds what it is for.
func TestTheRulesCanBeBroken(t *testing.T) {
	for _, tc := range []struct {
		pkg    string
		direct bool // else by the closure only
		dep    string
	}{
		{"internal/rules", true, "limitary/internal/store"},
		{"internal/rules", true, "context"},
		{"internal/rules", true, "log/slog"},
		{"internal/decimal", true, "time"},
		{"internal/judge", true, "google.golang.org/protobuf/proto"},
		{"internal/limits", false, "database/sql"},
		{"internal/runlength/data", true, "github.com/other/module"},
		{"internal/definition", true, "limitary/service"},
		{"internal/definition", false, "google.golang.org/grpc/codes"},
		{"internal/store", true, "limitary/internal/limits"},
		{"internal/store", false, "google.golang.org/protobuf/proto"},
		{"service", true, "github.com/jackc/pgx/v5"},
		{"service", true, "net/http"},
		{"internal/sheet", true, "limitary/internal/store"},
		{"internal/sheet", true, "limitary/service"},
		{"internal/server", true, "github.com/jackc/pgx/v5/pgxpool"},
		{"cmd/limitary", true, "limitary/internal/pgtest"},
		{"cmd/limitary", false, "testing"},
	} {
		p := listed{ImportPath: module + "/" + tc.pkg, Deps: []string{"fmt", tc.dep}}
		if tc.direct {
			p.Imports = []string{"fmt", tc.dep}
		}
		r, ok := rowOf(tc.pkg)
		if !ok {
			t.Errorf("%s has no row", tc.pkg)
		} else if len(problems(p, r)) == 0 {
			t.Errorf("%s may import %s (directly: %t)", tc.pkg, tc.dep, tc.direct)
		}
	}
	if r, _ := rowOf("internal/rules"); len(problems(listed{Imports: []string{"fmt", "limitary/internal/decimal", "gonum.org/v1/gonum/stat"}}, r)) > 0 {
		t.Error("internal/rules may not import what it should")
	}
}

func TestEveryPackageHasAPackageComment(t *testing.T) {
	for _, p := range mustPackages(t) {
		if generated := strings.HasPrefix(p.path(), "api/"); len(p.GoFiles) == 0 || generated {
			continue
		}
		want := "Package " + p.Name + " "
		if p.Name == "main" {
			want = "Command "
		}
		if !strings.HasPrefix(p.Doc, want) && !(p.Name == "main" && p.Doc != "") {
			t.Errorf("%s: its comment begins %q, want %q...", p.path(), p.Doc, want)
		}
	}
}

// TestPurePackagesReadNoClockAndNoChance looks for calls of time.Now and its kin, and of the random numbers that the
// whole program shares, in the source of pure packages.
func TestPurePackagesReadNoClockAndNoChance(t *testing.T) {
	looked := 0
	for _, p := range mustPackages(t) {
		if r, _ := rowOf(p.path()); !r.pure {
			continue
		}
		for _, name := range p.GoFiles {
			looked++
			src, err := os.ReadFile(filepath.Join(p.Dir, name))
			if err != nil {
				t.Fatal(err)
			}
			for _, found := range impurities(t, name, src) {
				t.Errorf("%s/%s", p.path(), found)
			}
		}
	}
	if looked < 20 {
		t.Errorf("only %d files looked at", looked)
	}
	t.Run("it finds them", func(t *testing.T) {
		const src = `package x
import ("time"; r "math/rand/v2"; "math/rand")
var _, _, _, _, _ = time.Now, time.Since(time.Time{}), r.IntN(3), rand.Float64, r.New(r.NewPCG(1, 2)).IntN(3)`
		if got := impurities(t, "x.go", []byte(src)); len(got) != 4 {
			t.Errorf("found %q, want time.Now, time.Since, r.IntN and rand.Float64", got)
		}
	})
}

// impurities gives file:line and name of what reads the clock or the shared random numbers.
func impurities(tb testing.TB, name string, src []byte) (found []string) {
	tb.Helper()
	files := token.NewFileSet()
	file, err := parser.ParseFile(files, name, src, 0)
	if err != nil {
		tb.Fatal(err)
	}
	imports := map[string]string{} // by the name used in the file
	for _, spec := range file.Imports {
		path, err := strconv.Unquote(spec.Path.Value)
		if err != nil {
			tb.Fatal(err)
		}
		local := map[string]string{"math/rand/v2": "rand"}[path]
		if local == "" {
			local = path[strings.LastIndexByte(path, '/')+1:]
		}
		if spec.Name != nil {
			local = spec.Name.Name
		}
		imports[local] = path
	}
	ast.Inspect(file, func(n ast.Node) bool {
		sel, ok := n.(*ast.SelectorExpr)
		if !ok {
			return true
		}
		pkg, ok := sel.X.(*ast.Ident)
		if !ok {
			return true
		}
		impure := false
		switch imports[pkg.Name] {
		case "time":
			impure = slices.Contains([]string{"Now", "Since", "Until", "Sleep", "After", "AfterFunc", "Tick", "NewTimer", "NewTicker"}, sel.Sel.Name)
		case "math/rand", "math/rand/v2":
			types := []string{"Rand", "Source", "Zipf", "PCG", "ChaCha8"}
			impure = !strings.HasPrefix(sel.Sel.Name, "New") && !slices.Contains(types, sel.Sel.Name)
		}
		if impure {
			found = append(found, files.Position(sel.Pos()).String()+": "+pkg.Name+"."+sel.Sel.Name)
		}
		return true
	})
	return found
}

// TestTheTopLevelHoldsOnlyWhatItShould keeps strays out of the first thing a reader sees.
func TestTheTopLevelHoldsOnlyWhatItShould(t *testing.T) {
	root, err := moduleRoot()
	if err != nil {
		t.Fatal(err)
	}
	allowed := []string{"api", "cmd", "service", "internal", "proto", "migrations", "testdata", "go.mod", "go.sum", "README.md", "DEVELOPERS.md", "buf.yaml", "LICENSE"}
	entries, err := os.ReadDir(root)
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		if !strings.HasPrefix(e.Name(), ".") && !slices.Contains(allowed, e.Name()) {
			t.Errorf("%s does not belong at the top level; only %v and names with a dot do", e.Name(), allowed)
		}
	}
}
