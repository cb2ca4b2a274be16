package main

import (
	"bytes"
	"errors"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"limitary/internal/postgres"
)

// TestServeMakesNoDatabaseWhereItCannotListen also covers an address that both listeners are to have.
func TestServeMakesNoDatabaseWhereItCannotListen(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	busy := l.Addr().String()
	free, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	once := free.Addr().String()
	if err := free.Close(); err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	dir := filepath.Join(t.TempDir(), "state")
	for name, c := range map[string]struct {
		args []string
		text string
	}{
		"a busy port for HTTP":           {[]string{"--http", busy}, "--http " + busy + ": the port is in use"},
		"a busy port for gRPC":           {[]string{"--grpc", busy}, "--grpc " + busy + ": the port is in use"},
		"one port for both":              {[]string{"--http", once, "--grpc", once}, "--grpc " + once + ": the port is in use"},
		"no port":                        {[]string{"--http", "localhost"}, "want HOST:PORT"},
		"beyond the machine without TLS": {[]string{"--http", "0.0.0.0:0"}, "--behind-proxy"},
		"a certificate without its key":  {[]string{"--tls-cert", "x.pem"}, "belong together"},
	} {
		var out, errs bytes.Buffer
		args := append([]string{"serve", "--data", dir, "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0"}, c.args...)
		if code := run(t.Context(), testEnvironment(&out, &errs), args); code != exitFailure {
			t.Errorf("%s: got code %d, want %d", name, code, exitFailure)
		}
		wantText(t, errs.String(), c.text)
		if _, err := os.Stat(dir); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("%s: got %v for the directory, want it not made", name, err)
		}
	}
}

func TestServeRefusesFiguresThatServeNobody(t *testing.T) {
	for _, c := range [][2]string{{"--sheet-rate", "0"}, {"--sheet-burst", "0"}, {"--sheet-calls-max", "-1"}, {"--calls-max", "0"}} {
		var out, errs bytes.Buffer
		if code := run(t.Context(), testEnvironment(&out, &errs), []string{"serve", c[0], c[1]}); code != exitUsage {
			t.Errorf("%s %s: got code %d, want %d", c[0], c[1], code, exitUsage)
		}
		wantText(t, errs.String(), c[0], "want")
	}
}

func TestMissingServerProgramsNameTheCommandThatInstallsThem(t *testing.T) {
	for _, c := range []struct {
		data    string
		version int
		want    string
	}{
		{"", 0, `"limitary install"`},
		{"/srv/qc", 0, `"limitary install"`},
		{"/srv/qc", 16, `"limitary install --data /srv/qc"`},
	} {
		d := databaseFlags{data: c.data}
		err := d.howToInstall(&postgres.NotFoundError{Version: c.version})
		if got := err.Error(); !strings.Contains(got, c.want) || !strings.Contains(got, "--database URL") || strings.Contains(got, "Debian package") {
			t.Errorf("version %d in %q: got %q, want %s in it", c.version, c.data, got, c.want)
		}
	}
	other := errors.New("no room")
	if got := (&databaseFlags{}).howToInstall(other); got != other {
		t.Errorf("got %v, want %v as it is", got, other)
	}
}
