package main

import (
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"ferrule/scenarios"
)

func newScenarios(env Env) *cobra.Command {
	cmd := &cobra.Command{
		Use:   "scenarios",
		Short: "List, show and write out the embedded scenarios",
		Args:  exactly(0),
		RunE:  func(*cobra.Command, []string) error { return listScenarios(env) },
	}
	cmd.AddCommand(
		&cobra.Command{
			Use:   "list",
			Short: "List the embedded scenarios",
			Args:  exactly(0),
			RunE:  func(*cobra.Command, []string) error { return listScenarios(env) },
		},
		&cobra.Command{
			Use:   "show NAME",
			Short: "Show an embedded scenario",
			Args:  exactly(1),
			RunE: func(_ *cobra.Command, args []string) error {
				in, err := openScenario(env, args[0])
				if err != nil {
					return err
				}
				_, err = env.Out.Write(in.data)
				return failed(err)
			},
		},
		&cobra.Command{
			Use:   "schema",
			Short: "Print the JSON Schema of scenario files, for editors",
			Args:  exactly(0),
			RunE: func(*cobra.Command, []string) error {
				_, err := env.Out.Write(scenarios.Schema())
				return failed(err)
			},
		},
		&cobra.Command{
			Use:   "write NAME DIR",
			Short: "Write an embedded scenario and the files it reads into a directory",
			Long:  "Write puts NAME.yaml and the files it reads into DIR, which is made when there is\nnone. A file that is there already is not touched.",
			Args:  exactly(2),
			RunE: func(_ *cobra.Command, args []string) error {
				return writeScenario(env, args[0], args[1])
			},
		},
	)
	return cmd
}

func listScenarios(env Env) error {
	entries := env.Studio.Library()
	width := 0
	for _, e := range entries {
		width = max(width, len(e.name))
	}
	var b strings.Builder
	for _, e := range entries {
		fmt.Fprintf(&b, "%-*s  %s\n", width, e.name, e.about)
	}
	_, err := fmt.Fprint(env.Out, b.String())
	return failed(err)
}

// openScenario opens an embedded scenario or says which there are.
func openScenario(env Env, name string) (input, error) {
	var names []string
	for _, e := range env.Studio.Library() {
		if e.name == name {
			in, err := env.Studio.Open(name)
			return in, failed(err)
		}
		names = append(names, e.name)
	}
	return input{}, fmt.Errorf("no embedded scenario is called %q; write one of %s", name, strings.Join(names, ", "))
}

// writeScenario writes a scenario and the matrices it reads.
func writeScenario(env Env, name, dir string) error {
	in, err := openScenario(env, name)
	if err != nil {
		return err
	}
	sc, err := env.Studio.Load(in)
	if err != nil {
		return failed(err)
	}
	paths := []string{filepath.Join(dir, name+".yaml")}
	texts := [][]byte{in.data}
	for _, m := range sc.Matrices() {
		text, err := fs.ReadFile(in.files, m)
		if err != nil {
			return failed(err)
		}
		paths = append(paths, filepath.Join(dir, filepath.FromSlash(m)))
		texts = append(texts, text)
	}
	for i, path := range paths {
		if err := env.Files.Create(path, texts[i]); errors.Is(err, fs.ErrExist) {
			return fmt.Errorf("%s: is there already and was not touched; choose another directory", path)
		} else if err != nil {
			return failed(err)
		}
		if _, err := fmt.Fprintln(env.Out, path); err != nil {
			return failed(err)
		}
	}
	return nil
}
