// Package postgres runs a private, durable PostgreSQL from the server programs
// installed on the machine, so that Limitary needs no database to be set up
// beforehand.
//
// # What is kept where
//
// Everything lives in one state directory:
//
//	lock       held with flock for as long as a process owns the directory; its text is the owner's process id
//	data/      the PostgreSQL data directory, of the account PostgreSQL runs as
//	data.tmp/  a data directory in the making; it is renamed to data/ when it is whole
//	run/       the Unix socket, open to that account and to root only
//	socket     one line: the directory the socket is really in
//	log        what PostgreSQL writes; log.1 is the one before, once log has grown
//
// [Start] takes the directory, makes the cluster if there is none, and answers
// when PostgreSQL takes connections. [Running] finds the cluster that another
// process has started in a directory. [Find] looks for the server programs.
//
// # Accounts and access
//
// PostgreSQL refuses to run as root. Started by root, it runs as the owner of the
// data directory, for a new one as user postgres, else as nobody; that account
// must be able to enter the state directory. Started by anyone else, it runs as
// that user. There is no TCP listener and there are no passwords: whoever can
// enter the socket's directory (mode 0700) may log in as any role. The superuser
// is [Owner], and [Database] is the one database made here; further roles belong
// to the migrations.
//
// # When things go wrong
//
// PostgreSQL is told by the kernel (Linux) to shut down when its owner dies, even
// by kill -9. A start that finds it still doing so, or finds the last processes of
// a PostgreSQL that was itself killed, waits for them: until the context ends, at
// most [Patience]. What was committed survives both; PostgreSQL recovers it from
// its own log while Start waits. A second owner is refused with an [InUseError]
// and never touches the first one's data. Nothing that was not made here is
// deleted: a data directory that is damaged, foreign or of another major version
// is refused with a text that says what to do.
package postgres
