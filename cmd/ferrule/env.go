package main

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"

	"github.com/mattn/go-isatty"
)

// Env is the world a command may touch. Tests hand in buffers.
type Env struct {
	Files  Files
	Out    io.Writer // results, and nothing else
	ErrOut io.Writer // messages, progress, timings, logs
	IsTTY  func(w io.Writer) bool
	Getenv func(key string) string

	Environ func() []string // all variables as NAME=VALUE; nil: there are none
	Studio  studio
}

// osEnv is the world of a process.
func osEnv(s studio) Env {
	return Env{
		Files: disk{}, Out: os.Stdout, ErrOut: os.Stderr, Getenv: os.Getenv, Environ: os.Environ, Studio: s,
		IsTTY: func(w io.Writer) bool {
			f, ok := w.(*os.File)
			return ok && isatty.IsTerminal(f.Fd())
		},
	}
}

// Files reads scenarios and writes results.
type Files interface {
	// Read returns the file at path.
	Read(path string) ([]byte, error)

	// Beside returns the files in the directory of path.
	Beside(path string) fs.FS

	// Write replaces the file at path whole or leaves it as it was.
	Write(path string, data []byte) error

	// Create writes a new file at path and makes the directories above it. It
	// fails with an error that is fs.ErrExist when there is one already.
	Create(path string, data []byte) error
}

// disk is the files of this machine.
type disk struct{}

// maxRead is far above what a scenario may have, so that the loader is the one
// to complain, and far below what would fill the memory.
const maxRead = 64 << 20

// Read implements Files. It refuses more than 64 MB.
func (disk) Read(path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, maxRead+1))
	if err != nil {
		return nil, err
	}
	if len(data) > maxRead {
		return nil, fmt.Errorf("%s: is larger than %d bytes, which no scenario is", path, maxRead)
	}
	return data, nil
}

// Beside implements Files.
func (disk) Beside(path string) fs.FS { return os.DirFS(filepath.Dir(path)) }

// Write implements Files by way of a temporary file in the same directory.
func (disk) Write(path string, data []byte) (err error) {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*")
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.Remove(f.Name()))
		}
	}()
	_, err = f.Write(data)
	if err == nil {
		err = f.Chmod(0o644)
	}
	if err = errors.Join(err, f.Close()); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}

// Create implements Files.
func (disk) Create(path string, data []byte) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return err
	}
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		return err
	}
	_, err = f.Write(data)
	if err = errors.Join(err, f.Close()); err != nil {
		return errors.Join(err, os.Remove(path))
	}
	return nil
}
