package kit_test

import (
	"bufio"
	"bytes"
	"encoding/json"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

const (
	// python is Debian's, which has the bindings of LibreOffice.
	python        = "/usr/bin/python3"
	driver        = "../../tools/office/drive.py"
	officeInstall = "install it first, on Debian as root: apt-get install --no-install-recommends libreoffice-calc python3-uno"
)

// office is one LibreOffice, driven by a program of ours, with a directory that it trusts.
type office struct {
	// folder is trusted; profile is its user's.
	folder, profile string
	in              io.WriteCloser
	out             *bufio.Reader
	log             *bytes.Buffer
}

// startOffice starts LibreOffice with a new profile of a locale. Ready waits for it, so that several can start side by side.
func startOffice(tb testing.TB, locale string) *office {
	tb.Helper()
	if _, err := exec.LookPath("soffice"); err != nil {
		tb.Fatal("LibreOffice is not on this machine; " + officeInstall)
	}
	if out, err := exec.Command(python, "-c", "import uno").CombinedOutput(); err != nil {
		tb.Fatalf("%s cannot drive LibreOffice: %v %s; %s", python, err, out, officeInstall)
	}
	o := &office{folder: tb.TempDir(), log: &bytes.Buffer{}}
	home := tb.TempDir()
	o.profile = filepath.Join(home, "profile")
	cmd := exec.Command(python, driver, o.profile, locale, o.folder)
	cmd.Env = []string{"PATH=" + os.Getenv("PATH"), "HOME=" + home, "LC_ALL=C.UTF-8"}
	cmd.Stderr = o.log
	var err error
	if o.in, err = cmd.StdinPipe(); err != nil {
		tb.Fatal(err)
	}
	out, err := cmd.StdoutPipe()
	if err != nil {
		tb.Fatal(err)
	}
	o.out = bufio.NewReader(out)
	if err := cmd.Start(); err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() {
		_ = o.in.Close() // which ends the driver, and that what it started
		if err := cmd.Wait(); err != nil {
			tb.Errorf("the driver of LibreOffice ended with %v: %s", err, o.log)
		}
	})
	return o
}

// ready waits until it takes requests.
func (o *office) ready(tb testing.TB) {
	tb.Helper()
	var said struct{ Ready bool }
	o.answer(tb, &said)
	if !said.Ready {
		tb.Fatal("LibreOffice did not start")
	}
}

func (o *office) answer(tb testing.TB, into any) {
	tb.Helper()
	line, err := o.out.ReadBytes('\n')
	if err == nil {
		err = json.Unmarshal(line, into)
	}
	if err != nil {
		tb.Fatalf("LibreOffice: %v", err)
	}
}

type args map[string]any

// do makes one request of the driver; into may be nil.
func (o *office) do(tb testing.TB, what string, with args, into any) {
	tb.Helper()
	request := args{"do": what}
	for name, value := range with {
		request[name] = value
	}
	line, err := json.Marshal(request)
	if err == nil {
		_, err = o.in.Write(append(line, '\n'))
	}
	if err != nil {
		tb.Fatal(err)
	}
	var said struct {
		OK    json.RawMessage
		Error string
	}
	o.answer(tb, &said)
	if said.Error != "" {
		tb.Fatal(said.Error)
	}
	if into != nil {
		if err := json.Unmarshal(said.OK, into); err != nil {
			tb.Fatalf("%s: %v in %s", what, err, said.OK)
		}
	}
}

// save puts a file where LibreOffice trusts it.
func (o *office) save(tb testing.TB, name string, data []byte) string {
	tb.Helper()
	path := filepath.Join(o.folder, name)
	if err := os.WriteFile(path, data, 0o600); err != nil {
		tb.Fatal(err)
	}
	return path
}

// cell is a cell as LibreOffice sees it: Kind is EMPTY, VALUE, TEXT or FORMULA, Of the kind of a formula's answer.
type cell struct {
	Kind, Of, Text, Formula string
	Number                  float64
	Error                   int
}

// read gives the cells of an area.
func (o *office) read(tb testing.TB, sheet, area string) (rows [][]cell) {
	tb.Helper()
	o.do(tb, "read", args{"sheet": sheet, "range": area}, &rows)
	return rows
}

// whole gives all cells of a sheet: their kinds, and what they hold rather than what they show.
func (o *office) whole(tb testing.TB, sheet string) (rows [][]cell) {
	tb.Helper()
	o.do(tb, "whole", args{"sheet": sheet}, &rows)
	return rows
}

func (o *office) one(tb testing.TB, sheet, at string) cell {
	tb.Helper()
	return o.read(tb, sheet, at)[0][0]
}

// run calls a function of the macros and gives its text.
func (o *office) run(tb testing.TB, name string, with ...any) string {
	tb.Helper()
	var text any
	o.do(tb, "call", args{"name": "Limitary." + name, "args": append([]any{}, with...)}, &text)
	s, _ := text.(string)
	return s
}
