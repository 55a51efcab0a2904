// Package controller is the vocabulary of control: what a controller can be
// ordered to do, in what states circuits and steps stand, and what it reports
// at the end. It decides nothing; the packages below it do.
package controller
