package main

import (
	"bytes"
	"fmt"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"ferrule/cmd/ferrule/internal/page"
	"ferrule/cmd/ferrule/internal/table"
	"ferrule/scenarios/result"
)

// A format writes a result in one form. Colour is for a terminal only.
type format func(r result.Result, colour bool) ([]byte, error)

// formatNamed finds what --format names.
func formatNamed(name string) (format, error) {
	switch name {
	case "text":
		return asText, nil
	case "json":
		return asJSON, nil
	case "csv":
		return asCSV, nil
	case "md":
		return asMarkdown, nil
	default:
		return nil, fmt.Errorf("%q is no format; write one of text, json, csv, md", name)
	}
}

// formatOf finds the format that the suffix of a file asks for.
func (c *call) formatOf(path string) (format, error) {
	switch filepath.Ext(path) {
	case ".txt":
		return asText, nil
	case ".json":
		return asJSON, nil
	case ".csv":
		return asCSV, nil
	case ".md":
		return asMarkdown, nil
	case ".html":
		return c.asPage, nil
	case ".xml":
		return asJUnit, nil
	default:
		return nil, fmt.Errorf("%q has no suffix that says its format; end it in .html, .json, .csv, .md, .txt or .xml", path)
	}
}

func asText(r result.Result, colour bool) ([]byte, error) {
	var b bytes.Buffer
	err := table.Text(&b, r, table.Options{Colour: colour})
	return b.Bytes(), err
}

func asMarkdown(r result.Result, _ bool) ([]byte, error) {
	var b bytes.Buffer
	err := table.Markdown(&b, r, table.Options{})
	return b.Bytes(), err
}

func asCSV(r result.Result, _ bool) ([]byte, error) {
	var b bytes.Buffer
	err := result.WriteCSV(&b, r)
	return b.Bytes(), err
}

func asJSON(r result.Result, _ bool) ([]byte, error) { return result.Encode(withoutRuns(r)) }

// withoutRuns is r without the runs that only a page shows, so that a file is
// the same whatever is written beside it.
func withoutRuns(r result.Result) result.Result {
	switch r := r.(type) {
	case *result.Batch:
		c := *r
		c.Runs = nil
		return &c
	case *result.Comparison:
		c := *r
		c.Runs = nil
		return &c
	default:
		return r
	}
}

func (c *call) asPage(r result.Result, _ bool) ([]byte, error) {
	return page.Report(r, page.Options{Command: c.again})
}

// asksPage reports whether a page is to be written.
func (c *call) asksPage() bool {
	return slices.ContainsFunc(c.outs, func(path string) bool { return filepath.Ext(path) == ".html" })
}

// commandLine is the command that was given, without where files are and what
// is written: enough to make the same result again.
func commandLine(cmd *cobra.Command, args []string) string {
	words := strings.Fields(cmd.CommandPath())
	for _, a := range args {
		words = append(words, quoted(filepath.Base(a)))
	}
	cmd.Flags().Visit(func(f *pflag.Flag) {
		var values []string
		switch v := f.Value.(type) {
		case pflag.SliceValue:
			values = v.GetSlice()
		default:
			values = []string{f.Value.String()}
		}
		switch f.Name {
		case "out", "format", "log", "cores", "resume", "gate":
			return // they do not change the result
		}
		for _, v := range values {
			if f.Name == "acts" {
				v = filepath.Base(v)
			}
			words = append(words, "--"+f.Name, quoted(v))
		}
	})
	return strings.Join(words, " ")
}

// quoted is a word as a shell takes it.
func quoted(s string) string {
	plain := strings.IndexFunc(s, func(r rune) bool {
		return !(r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || strings.ContainsRune("-_./:=@%+,", r))
	}) < 0
	if plain && s != "" {
		return s
	}
	return "'" + strings.ReplaceAll(s, "'", `'\''`) + "'"
}

// write shows r on standard output and writes the files asked for. Every form
// is made before the first byte is written, so a result that cannot be written
// leaves nothing half done.
func (c *call) write(r result.Result) error {
	if _, err := result.Encode(r); err != nil {
		return err // a figure that is no number must not pass in any form
	}
	forms := make([][]byte, 1+len(c.outs))
	f, err := formatNamed(c.format)
	if err != nil {
		return err
	}
	if forms[0], err = f(r, c.colour()); err != nil {
		return err
	}
	for i, path := range c.outs {
		if f, err = c.formatOf(path); err != nil {
			return err
		}
		if forms[1+i], err = f(r, false); err != nil {
			return err
		}
	}
	if _, err := c.env.Out.Write(forms[0]); err != nil {
		return fmt.Errorf("standard output: %w", err)
	}
	for i, path := range c.outs {
		if err := c.env.Files.Write(path, forms[1+i]); err != nil {
			return fmt.Errorf("--out: %w", err)
		}
	}
	return nil
}

// colour reports whether standard output takes colour: it is a terminal, and
// neither NO_COLOR nor TERM=dumb says otherwise.
func (c *call) colour() bool {
	return c.env.IsTTY(c.env.Out) && c.env.Getenv("NO_COLOR") == "" && c.env.Getenv("TERM") != "dumb"
}
