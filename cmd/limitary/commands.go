package main

// commands lists the commands in the order they are shown.
func commands() []command {
	return []command{
		{"try", "start with nothing set up: a private database, the demo, an address to try", runTry},
		{"serve", "run the service", runServe},
		{"install", "make sure that PostgreSQL's server programs are there", runInstall},
		{"migrate", "bring the schema of a database up to date", runMigrate},
		{"recheck", "recompute every track of a database and compare", runRecheck},
		{"key", "create, list and revoke keys, directly on the database", runKey},
		{"chart", "create, list and show charts", runChart},
		{"version", "propose and decide on versions of limits; alone, print this program's version", runVersion},
		{"post", "post a file of control results", runPost},
		{"compute", "compute limits and findings from a file of results, with no service", runCompute},
		{"judge", "judge a file of results by given limits, with no service", runJudge},
		{"run-length", "tell what rules cost and what they catch, with no service", runRunLength},
		{"validate", "run the published examples and print a dated pass list", runValidate},
	}
}
