// Package scenarios reads scenario files: the form of the file, decoding with
// positions, defaults and validation.
//
// [Load] turns bytes into a [Scenario], which is plain data: names are dense
// indices, times are picoseconds, rates bit/s, lengths millimetres. Every
// fault of a file is found in one go and named as
// "file:line:column: key: what; hint" ([Problem]). A scenario says what the
// network, the traffic and the plans are; nothing here builds or runs them.
//
// The data passes through four forms: YAML nodes, which know their positions;
// options laid over them; raw structs, which hold what was given; and the
// Scenario, which holds what was meant.
package scenarios
