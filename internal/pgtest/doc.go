// Package pgtest gives tests a real PostgreSQL of their own: they need no server, no
// address and no environment variable, only the installed server programs, and never
// a stand-in.
//
// A test binary starts one cluster in its TestMain:
//
//	func TestMain(m *testing.M) { pgtest.Main(m, migrate) }
//
// where migrate brings an empty database up to date as its owner. [Main] runs it once,
// on a template; [New] gives each test a copy of that. The copy takes some milliseconds and
// lets tests commit, listen, lock and run in parallel as they would in production. A
// suite that cannot start its database fails and says why; it never skips.
//
// What the copy has from the template is everything in the database, and the grants and
// settings on the database itself. Roles belong to the cluster: all tests of a binary share
// those that migrate makes, and must not change them.
//
// To see how code fares when its database fails it, [Database.Cut] ends every connection,
// [Database.Refuse] keeps new ones out until [Database.Allow], and [StartCluster]
// gives a whole server that may be stopped, killed and started again.
//
// Nothing here survives a loss of power, but what was committed survives a kill -9
// of PostgreSQL, as it does in production.
package pgtest
