package main

import (
	"context"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/report"
	"limitary/internal/report/judged"
	"limitary/internal/resultfile"
)

// sourceFlags say how to read a file of results. Compute and judge share them.
type sourceFlags struct {
	values, exclude                              listFlag
	subgroup, id, time, mark, delimiter, decimal string
	material, inspected                          string
	// materialFlag is what the flag for the column of materials is called.
	materialFlag string
}

// register adds the flags. Post has the name --material for a material that all rows share.
func (s *sourceFlags) register(f *flagSet, exclusions bool) {
	if s.materialFlag == "" {
		s.materialFlag = "material"
	}
	f.StringVar(&s.material, s.materialFlag, "", "`COLUMN` of control materials, which tell the levels of a standardised chart apart")
	f.StringVar(&s.inspected, "inspected", "", "`COLUMN` that says how much was inspected for the count in --value, or a number that holds for every row")
	f.Var(&s.values, "value", "`COLUMN` of the readings, or several separated by commas where a row holds several; found where only one holds numbers")
	f.StringVar(&s.subgroup, "subgroup", "", "`COLUMN` whose equal entries in consecutive rows make one subgroup, where a row holds one reading")
	f.StringVar(&s.id, "id", "", "`COLUMN` that names the results")
	f.StringVar(&s.time, "time", "", "`COLUMN` of times; the order is that of the file all the same")
	f.StringVar(&s.mark, "break", "", "`COLUMN` that says yes where a segment begins")
	if exclusions {
		f.Var(&s.exclude, "exclude", "`COLUMN` that holds a reason where a result is left out of the estimate, or LINE=REASON for one result; repeatable")
	}
	f.StringVar(&s.delimiter, "delimiter", "", "`NAME` of the separator: comma, semicolon or tab; found from the file if not given")
	f.StringVar(&s.decimal, "decimal", "", "`NAME` of the decimal: point or comma; found from the file if not given")
}

// listFlag collects the values of a repeated flag.
type listFlag []string

func (l *listFlag) String() string     { return strings.Join(*l, ",") }
func (l *listFlag) Set(s string) error { *l = append(*l, s); return nil }

// source is a file of results as read.
type source struct {
	table *resultfile.Table
	// name is how messages and reports call it.
	name string
	// excluded has the reason of each row left out of the estimate.
	excluded map[int]string
	// inspected is how much was looked at for every count, 0 where the file or the kind of chart says it.
	inspected float64
}

// lineReason is the form LINE=REASON of --exclude.
var lineReason = regexp.MustCompile(`^\s*([0-9]+)\s*=(.*)$`)

// options turns the flags into those of the reader; the exclusions of single lines come apart.
func (s *sourceFlags) options() (o resultfile.Options, lines []string, err error) {
	o = resultfile.Options{Subgroup: s.subgroup, ID: s.id, Time: s.time, Break: s.mark, Material: s.material}
	if _, err := s.inspectedEach(); err != nil {
		o.Inspected = s.inspected
	}
	if o.Delimiter, err = resultfile.ParseDelimiter(s.delimiter); err != nil {
		return o, nil, fmt.Errorf("--%w", err)
	}
	if o.Decimal, err = resultfile.ParseDecimal(s.decimal); err != nil {
		return o, nil, fmt.Errorf("--%w", err)
	}
	if o.Values, err = splitNames(s.values); err != nil {
		return o, nil, err
	}
	for _, e := range s.exclude {
		switch {
		case lineReason.MatchString(e):
			lines = append(lines, e)
		case o.Exclude != "" && o.Exclude != e:
			return o, nil, fmt.Errorf("--exclude %q: a column is named already, %q; for one result give LINE=REASON", e, o.Exclude)
		default:
			o.Exclude = e
		}
	}
	return o, lines, nil
}

// inspectedEach gives the number that --inspected holds; it is an error where it names a column. A column name is never a
// number.
func (s *sourceFlags) inspectedEach() (float64, error) {
	if s.inspected == "" {
		return 0, nil
	}
	return parseNumber(s.inspected)
}

// splitNames splits column names at commas; a name that holds a comma is quoted.
func splitNames(texts []string) (names []string, err error) {
	for _, t := range texts {
		r := csv.NewReader(strings.NewReader(t))
		r.TrimLeadingSpace = true
		fields, err := r.Read()
		if err != nil {
			return nil, fmt.Errorf("--value %q: want column names separated by commas, a name with a comma in double quotes", t)
		}
		names = append(names, fields...)
	}
	if slices.Contains(names, "") {
		return nil, fmt.Errorf("--value: a column name is empty")
	}
	return names, nil
}

// usageError is a fault of the call, as opposed to one of the file.
type usageError struct{ error }

// read reads the file at path, "-" for standard input. A fault of the flags is a usageError.
func (s *sourceFlags) read(ctx context.Context, env *environment, path string) (*source, error) {
	o, lines, err := s.options()
	if err != nil {
		return nil, usageError{err}
	}
	src := &source{name: filepath.Base(path)}
	src.inspected, _ = s.inspectedEach()
	if src.inspected < 0 || s.inspected != "" && o.Inspected == "" && src.inspected == 0 {
		return nil, usageError{fmt.Errorf("--inspected %s: want more than 0", s.inspected)}
	}
	in, size, err := openResults(env, path)
	if err != nil {
		return nil, err
	}
	defer in.Close()
	if path == "-" {
		src.name = "standard input"
	}
	bar := newProgress(env, "reading "+report.Foreign(src.name), size)
	o.Progress = bar.show
	src.table, err = readTable(ctx, in, o)
	bar.clear()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", report.Foreign(src.name), s.inFlags(err))
	}
	return src, src.exclude(lines)
}

// inFlags calls the flag for the column of materials by its name here.
func (s *sourceFlags) inFlags(err error) error {
	var bad *resultfile.Error
	if errors.As(err, &bad) {
		bad.Advice = strings.ReplaceAll(bad.Advice, "--material", "--"+s.materialFlag)
	}
	return err
}

// rows reads the table as results of a chart.
func (src *source) rows(kind chart.Kind, size int) *judged.Rows {
	return &judged.Rows{Table: src.table, Kind: kind, Size: size, Inspected: src.inspected}
}

// openResults opens the file and gives its size, 0 where that is not known.
func openResults(env *environment, path string) (in io.ReadCloser, size int64, err error) {
	if path == "-" {
		return io.NopCloser(env.Stdin), 0, nil
	}
	file, err := os.Open(path)
	if err != nil {
		var bad *fs.PathError
		if errors.As(err, &bad) {
			return nil, 0, fmt.Errorf("%s: %w", report.Foreign(path), bad.Err)
		}
		return nil, 0, err
	}
	info, err := file.Stat()
	if err == nil && info.IsDir() {
		err = fmt.Errorf("%s: is a folder, want a file of results", report.Foreign(path))
	}
	if err != nil {
		file.Close()
		return nil, 0, err
	}
	if info.Mode().IsRegular() {
		size = info.Size()
	}
	return file, size, nil
}

// readTable reads in the background, so that an interrupt is obeyed while a terminal or a pipe says nothing.
func readTable(ctx context.Context, in io.Reader, o resultfile.Options) (*resultfile.Table, error) {
	type answer struct {
		table *resultfile.Table
		err   error
	}
	done := make(chan answer, 1)
	go func() {
		t, err := resultfile.Read(in, o)
		done <- answer{t, err}
	}()
	select {
	case a := <-done:
		return a.table, a.err
	case <-ctx.Done():
		return nil, errors.New("interrupted")
	}
}

// exclude takes in the reasons of the table and those given by line.
func (src *source) exclude(lines []string) error {
	src.excluded = map[int]string{}
	for i := range src.table.Len() {
		if src.table.Excluded(i) {
			src.excluded[i] = src.table.Row(i).Exclude
		}
	}
	for _, text := range lines {
		m := lineReason.FindStringSubmatch(text)
		reason := strings.TrimSpace(m[2])
		if reason == "" {
			return usageError{fmt.Errorf("--exclude %q: the reason is missing; write LINE=REASON", text)}
		}
		row, err := src.rowAt("--exclude", m[1])
		if err != nil {
			return err
		}
		if had, twice := src.excluded[row]; twice && had != reason {
			return fmt.Errorf("--exclude %q: line %s is excluded already, for another reason: %q", text, m[1], report.ForeignLong(had))
		}
		src.excluded[row] = reason
	}
	for row, reason := range src.excluded {
		if len(reason) > limits.ReasonBytesMax {
			return fmt.Errorf("line %d: the reason for the exclusion has %d bytes, the limit is %d", src.table.Line(row), len(reason), limits.ReasonBytesMax)
		}
	}
	return nil
}

// rowAt gives the row that a line of the file belongs to.
func (src *source) rowAt(flag, text string) (int, error) {
	t := src.table
	line, err := strconv.Atoi(text)
	if err != nil || line < t.Line(0) || line > t.Lines {
		return 0, fmt.Errorf("%s: line %s holds no result; those of %s stand in lines %d to %d", flag, text, src.name, t.Line(0), t.Line(t.Len()-1))
	}
	row, found := searchLine(t, line)
	if !found && t.Row(row).Group == "" {
		return 0, fmt.Errorf("%s: no result begins in line %d of %s", flag, line, src.name)
	}
	return row, nil
}

// searchLine gives the last row that begins at the line or above it, and whether it begins there.
func searchLine(t *resultfile.Table, line int) (row int, found bool) {
	low, high := 0, t.Len()
	for high-low > 1 {
		middle := (low + high) / 2
		if t.Line(middle) <= line {
			low = middle
		} else {
			high = middle
		}
	}
	return low, t.Line(low) == line
}
