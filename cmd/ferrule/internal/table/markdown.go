package table

import (
	"bufio"
	"io"
	"strings"
)

func writeMarkdown(w io.Writer, d *doc) error {
	b := bufio.NewWriter(w)
	for i, bl := range d.blocks {
		if i > 0 {
			b.WriteString("\n")
		}
		text := escapeMarkdown(join("", bl.line...).text)
		switch {
		case bl.grid != nil:
			writeMarkdownGrid(b, bl.grid)
		case bl.heading && i == 0:
			b.WriteString("# " + text + "\n")
		case bl.heading:
			b.WriteString("## " + text + "\n")
		default:
			b.WriteString(text + "\n")
		}
	}
	return b.Flush()
}

func writeMarkdownGrid(b *bufio.Writer, g *grid) {
	for _, c := range g.cols {
		b.WriteString("| " + escapeMarkdown(c.head) + " ")
	}
	b.WriteString("|\n")
	for _, c := range g.cols {
		if c.right {
			b.WriteString("| ---: ")
		} else {
			b.WriteString("| --- ")
		}
	}
	b.WriteString("|\n")
	for _, row := range g.rows {
		for _, c := range row {
			text := escapeMarkdown(c.text)
			if text != "" && (c.tone == bad || c.tone == strong) {
				text = "**" + text + "**"
			}
			b.WriteString("| " + text + " ")
		}
		b.WriteString("|\n")
	}
}

// markdownEscapes covers what can end a cell, open markup or open an element.
var markdownEscapes = strings.NewReplacer(
	"\\", "\\\\", "|", "\\|", "*", "\\*", "_", "\\_", "`", "\\`",
	"[", "\\[", "]", "\\]", "<", "&lt;", ">", "&gt;", "&", "&amp;", "#", "\\#",
	"\r\n", " ", "\n", " ", "\r", " ")

// escapeMarkdown makes text plain text on one line.
func escapeMarkdown(text string) string { return markdownEscapes.Replace(text) }
