package study

// Gather lets tests in package study_test read a model that they ran
// themselves.
var Gather = gather
