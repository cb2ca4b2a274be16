// Package archtest_test holds the structure of the repository as tests: which package may import which, what must not be
// reachable from where, and the habits that a tool can check.
//
// The table below is the whole of it. Every package of the module has a row, found by its path or by a tree ("x/...");
// the narrowest wins. A row says what its packages may import directly; the standard library is allowed except for
// what the row refuses. Packages to come have rows marked planned, so that they are born under their rule.
package archtest_test

// row is what one package, or a tree of packages, may import.
type row struct {
	// pkg is a path within the module; "/..." at its end stands for the package and all below it.
	pkg string
	// own are the paths within the module that it may import, trees included.
	own []string
	// modules are the prefixes of import paths outside the module and the standard library.
	modules []string
	// refused are prefixes of standard packages it must not import, for the reason why.
	refused []string
	why     string
	// unreachable are prefixes that must not be in its transitive closure either.
	unreachable []string
	// pure packages read no clock and no global source of random numbers.
	pure bool
	// planned marks a package that does not exist yet.
	planned bool
}

var (
	core = []string{"internal/chart", "internal/decimal", "internal/rules", "internal/judge", "internal/limits", "internal/runlength/...",
		"internal/counts", "internal/diagnostics/...", "internal/changetest"}

	gonum    = []string{"gonum.org/v1/gonum"}
	pgx      = []string{"github.com/jackc/pgx/v5"}
	grpc     = []string{"google.golang.org/grpc", "google.golang.org/protobuf", "google.golang.org/genproto/googleapis"}
	gateway  = []string{"github.com/grpc-ecosystem/grpc-gateway/v2"}
	wire     = joined(grpc, gateway)
	excelize = []string{"github.com/xuri/excelize/v2"}
	outworld = []string{"net", "database/sql", "log", "os", "context", "time", "runtime"}

	coreWhy = "the numeric core takes values and gives values: no clock, context, log, file, network or database"
)

// table is the structure, the deepest layer first.
var table = []row{
	// The numeric core.
	coreRow("internal/chart"),
	coreRow("internal/decimal"),
	coreRow("internal/rules"),
	coreRow("internal/judge"),
	coreRow("internal/counts"),
	coreRow("internal/limits"),
	coreRow("internal/runlength/..."),
	// A run length may take seconds on all processors, and its caller may give it up: a context and the processors' number.
	longRow("internal/runlength"),
	longRow("internal/runlength/effort"),
	coreRow("internal/diagnostics/..."),
	coreRow("internal/changetest"),

	// Definitions and the course of a track: validated values, still pure.
	{pkg: "internal/definition", own: core, refused: []string{"net", "database/sql", "log", "os", "context"},
		why: "a definition knows no database, no wire and no request", unreachable: joined(wire, pgx, []string{"net/http", "database/sql"}), pure: true},
	{pkg: "internal/track", own: joined(core, []string{"internal/definition"}), refused: []string{"net", "database/sql", "log", "os", "context"},
		why: "the course of a track is a function of what was posted", unreachable: joined(wire, pgx, []string{"net/http", "database/sql"}), pure: true},

	// Storage: every line of SQL. The algorithms of limits and run lengths are not its business.
	{pkg: "migrations"},
	{pkg: "internal/store", own: []string{"internal/chart", "internal/decimal", "internal/rules", "internal/judge", "internal/definition", "internal/track", "migrations"},
		modules: pgx, refused: []string{"net/http", "database/sql"}, why: "the store speaks SQL through pgx and nothing else", unreachable: wire},
	{pkg: "internal/postgres", modules: pgx, refused: []string{"net/http", "database/sql"}, why: "a database process is not a service", unreachable: wire},
	{pkg: "internal/pgtest", own: []string{"internal/postgres", "internal/store", "migrations"}, modules: pgx, unreachable: wire},
	{pkg: "internal/install", own: []string{"internal/postgres"}, unreachable: joined(wire, []string{"net/http"})},

	// The contract and what serves it.
	{pkg: "api"},
	{pkg: "api/...", modules: wire},
	{pkg: "service", own: joined(core, []string{"api/...", "internal/definition", "internal/track", "internal/store"}), modules: grpc,
		refused: []string{"net/http", "database/sql"}, why: "a handler decodes, calls and encodes; SQL and HTTP live elsewhere"},
	{pkg: "internal/sheet", own: []string{"api/...", "internal/decimal", "internal/sheet/..."}, modules: grpc, refused: []string{"database/sql"},
		why: "the sheet is a client of the API", unreachable: pgx},
	{pkg: "internal/sheet/...", own: []string{"internal/sheet/..."}, modules: excelize, refused: []string{"net/http", "database/sql"},
		why: "blocks, tables and workbooks are read and written the same whoever asks", unreachable: joined(wire, pgx)},
	planned(row{pkg: "internal/console/...", own: []string{"api/..."}, modules: grpc, refused: []string{"database/sql"},
		why: "the console is a client of the API", unreachable: pgx}),
	{pkg: "internal/server", own: []string{"api/...", "service", "internal/sheet/...", "internal/console/...", "internal/store", "internal/definition"},
		modules: wire, refused: []string{"database/sql"}, why: "listeners and interceptors know no SQL"},

	// What the command line adds to the core.
	{pkg: "testdata"},
	{pkg: "internal/resultfile", own: []string{"internal/chart", "internal/decimal"}, refused: []string{"net", "database/sql", "log", "context"},
		why: "a file is read the same whoever asks", unreachable: joined(wire, pgx)},
	{pkg: "internal/plot", own: []string{"internal/chart", "internal/decimal"}, refused: []string{"net", "database/sql", "log", "context", "os", "time"},
		why: "a plot is a function of its data", unreachable: joined(wire, pgx), pure: true},
	{pkg: "internal/validation", own: joined(core, []string{"testdata"}), refused: []string{"net", "database/sql", "log", "os"},
		why: "validation runs on what is built in", unreachable: joined(wire, pgx), pure: true},
	{pkg: "internal/report/...", own: joined(core, []string{"internal/plot", "internal/resultfile", "internal/validation", "internal/report/..."}),
		refused: []string{"net", "database/sql", "log"}, why: "a report is text about results", unreachable: joined(wire, pgx), pure: true},
	{pkg: "internal/demo", own: []string{"api/..."}, modules: grpc, refused: []string{"net", "database/sql"},
		why: "the demonstration posts through the API as anyone would", unreachable: pgx, pure: true},

	// Programs.
	{pkg: "cmd/limitary", own: joined(core, []string{"api/...", "service", "testdata", "internal/definition", "internal/store", "internal/postgres", "internal/install",
		"internal/resultfile", "internal/plot", "internal/validation", "internal/report/...", "internal/demo", "internal/server"}),
		modules: grpc, refused: []string{"net/http", "database/sql"}, why: "the command line starts things and prints what they give",
		unreachable: []string{"testing", module + "/internal/pgtest", module + "/internal/archtest", module + "/internal/tools"}},
	{pkg: "internal/tools/testreport"},
	{pkg: "internal/archtest"},
}

func coreRow(pkg string) row {
	return row{pkg: pkg, own: core, modules: gonum, refused: outworld, why: coreWhy,
		unreachable: joined(wire, pgx, []string{"net/http", "database/sql"}), pure: true}
}

// longRow is a core package whose computations can be given up.
func longRow(pkg string) row {
	r := coreRow(pkg)
	r.refused = []string{"net", "database/sql", "log", "os", "time"}
	return r
}

func planned(r row) row { r.planned = true; return r }

func joined(lists ...[]string) (all []string) {
	for _, l := range lists {
		all = append(all, l...)
	}
	return all
}
