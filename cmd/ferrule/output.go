package main

import (
	"bytes"
	"fmt"
	"path/filepath"

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
func formatOf(path string) (format, error) {
	switch filepath.Ext(path) {
	case ".txt":
		return asText, nil
	case ".json":
		return asJSON, nil
	case ".csv":
		return asCSV, nil
	case ".md":
		return asMarkdown, nil
	default:
		return nil, fmt.Errorf("%q has no suffix that says its format; end it in .json, .csv, .md or .txt", path)
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

func asJSON(r result.Result, _ bool) ([]byte, error) { return result.Encode(r) }

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
		if f, err = formatOf(path); err != nil {
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
