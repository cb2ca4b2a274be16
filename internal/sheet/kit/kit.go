package kit

import (
	"bytes"
	"embed"
	"fmt"
	"regexp"
	"slices"
	"strings"
	"sync"
)

// Service is the address that the files name.
const Service = "http://127.0.0.1:7410"

// IndexName is the name of the listing.
const IndexName = "index.txt"

// File is one file of the kit.
type File struct {
	// Name is what it is saved as.
	Name        string
	ContentType string
	// Title says what it is, Install how to put it where it works, Limits what it does not do.
	Title, Install, Limits string
	// Run says whether the project's tests run it and with what, or that it was not run.
	Run string

	body func(address string) ([]byte, error)
}

// Bytes gives the file for the service at an address, such as https://limits.example:7410. One that is no plain address is
// left out: it may come from a caller, and must not become a line of a program.
func (f File) Bytes(address string) ([]byte, error) {
	if !addressForm.MatchString(address) {
		address = Service
	}
	return f.body(address)
}

// addressForm is a scheme, a host name or address, and a port or none.
var addressForm = regexp.MustCompile(`^https?://(?:[A-Za-z0-9](?:[A-Za-z0-9.-]{0,251}[A-Za-z0-9])?|\[[0-9A-Fa-f:.]{2,45}\])(?::[0-9]{1,5})?$`)

//go:embed files
var files embed.FS

const (
	plain     = "text/plain; charset=utf-8"
	formulas  = "formulas.txt"
	workbook  = "formulas.xlsx"
	folder    = "files/"
	firstLine = "Title"
)

// Files lists the kit, the listing itself first.
func Files() []File { return slices.Clone(load()) }

// Find gives a file by its name; an empty name is the listing.
func Find(name string) (File, bool) {
	if name == "" {
		name = IndexName
	}
	at := slices.IndexFunc(load(), func(f File) bool { return f.Name == name })
	if at < 0 {
		return File{}, false
	}
	return load()[at], true
}

var loaded struct {
	once sync.Once
	all  []File
}

// load reads the files once. They are built in, so that a fault in one shows in every test.
func load() []File {
	loaded.once.Do(func() {
		loaded.all = []File{{Name: IndexName, ContentType: plain, Title: "This listing", Install: "Nothing to install.", Limits: "None.", Run: "Nothing to run.",
			body: func(address string) ([]byte, error) { return index(address), nil }}}
		for _, name := range []string{formulas, workbook, "limitary-libreoffice.bas", "limitary-vba.bas", "limitary-browser.js", "limitary-table.pq"} {
			loaded.all = append(loaded.all, describe(name))
		}
	})
	return loaded.all
}

func describe(name string) File {
	source, contentType := name, plain
	if name == workbook {
		source, contentType = formulas, workbookType
	}
	said := header(text(source))
	f := File{Name: name, ContentType: contentType, Title: said[firstLine], Install: said["Install"], Limits: said["Limits"], Run: said["Run here"]}
	if name == workbook {
		f.Title = "The same formulas as a workbook"
		f.Install = "Save it, write the address, a chart and a key into the three cells at the top, and let its links be updated; in LibreOffice put its folder among the trusted locations first (Tools, Options, Security, Macro Security, Trusted Sources)."
		f.body = Workbook
		return f
	}
	crlf := strings.HasSuffix(name, ".bas")
	f.body = func(address string) ([]byte, error) {
		s := strings.ReplaceAll(text(name), Service, address)
		if crlf { // the editors of Basic import lines that end so
			s = strings.ReplaceAll(s, "\n", "\r\n")
		}
		return []byte(s), nil
	}
	return f
}

func text(name string) string {
	data, err := files.ReadFile(folder + name)
	if err != nil {
		panic(err) // built in: this cannot be in a program whose tests have run
	}
	return string(data)
}

var (
	field   = regexp.MustCompile(`^(Title|Install|Limits|Run here): (.*)$`)
	leader  = regexp.MustCompile(`^(?:'|//)?\s?`)
	carryOn = "  "
)

// header reads the first lines of a file: fields, each going on in lines that are indented.
func header(s string) map[string]string {
	said, last := map[string]string{}, ""
	for line := range strings.SplitSeq(s, "\n") {
		if strings.HasPrefix(line, "Attribute ") {
			continue
		}
		if commented := leader.FindString(line); strings.TrimSpace(commented) != "" {
			line = line[len(commented):]
		}
		m := field.FindStringSubmatch(line)
		switch {
		case m != nil:
			last = m[1]
			said[last] = m[2]
		case last != "" && strings.HasPrefix(line, carryOn):
			said[last] += " " + strings.TrimSpace(line)
		default:
			return said
		}
	}
	return said
}

// index lists the files with all that is said of them.
func index(address string) []byte {
	var b bytes.Buffer
	fmt.Fprintf(&b, "For spreadsheets that ask the service at %s.\n\nA signal is statistical evidence about the measuring process; it is not a compliance, release or safety decision.\nNo answer from the service means not judged.\n", address)
	for _, f := range load()[1:] {
		fmt.Fprintf(&b, "\n%s/sheet/kit/%s\n  %s.\n  Install: %s\n  Limits: %s\n  Run here: %s\n", address, f.Name, f.Title, f.Install, f.Limits, f.Run)
	}
	return b.Bytes()
}
