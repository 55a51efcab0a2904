// Package repolint holds the tests of the repository itself. They parse every
// Go file of the module and fail on an import against the stated direction, an
// unformatted file, a call that would make a run depend on more than its
// scenario, plan and seed, a walk over a map on the way to a result, an
// exported name without a comment, a file or function too long to read, a
// skipped test, a note left undone, a path of one machine, a stray entry at
// the top of the repository, and a go.mod that says something untrue.
//
// Every rule stands beside a test that hands it a bad sample: a rule that can
// no longer catch anything fails with that test. The package has no product
// code, and nothing imports it.
package repolint
