package main

import (
	"bytes"
	"compress/gzip"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

// A state is the folder of --resume: what a study has finished, so that after
// being killed at any point it goes on where it was. Each file is written under
// another name, brought to the disk, and then renamed; it begins with a checksum of what
// follows. A folder that holds anything else, a damaged file, or the state of
// another scenario or of another build of this program is refused and left
// as it is.
type state struct{ dir string }

// Names within the folder, and the first words of the files.
const (
	stateNote = "ferrule-state"
	statePart = ".part" // of a file that is being written
	stateRun  = ".run"
	stateMark = "ferrule state 1 "
)

// openState opens the folder of a study of the scenario with that hash, and
// makes it when there is none. Every file in it is checked before anything is
// changed.
func openState(dir, hash, version string) (*state, error) {
	s := &state{dir}
	note := fmt.Sprintf("program %s\nscenario %s\n", version, hash)
	files, err := os.ReadDir(dir)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, err
	}
	noted := false
	var parts []string
	for _, f := range files {
		path := filepath.Join(dir, f.Name())
		switch ext := filepath.Ext(f.Name()); {
		case !f.Type().IsRegular():
			return nil, s.foreign(path)
		case f.Name() == stateNote:
			noted = true
			data, err := s.read(path)
			if err != nil {
				return nil, err
			}
			if string(data) != note {
				return nil, fmt.Errorf("%s: belongs to another scenario or another build of the program; name another folder.\nIt says:\n%sbut this is\n%s", path, data, note)
			}
		case ext == stateRun:
			if _, err := s.read(path); err != nil {
				return nil, err
			}
		case ext == statePart && (strings.HasSuffix(f.Name(), stateRun+statePart) || f.Name() == stateNote+statePart):
			parts = append(parts, path)
		default:
			return nil, s.foreign(path)
		}
	}
	if !noted && len(files) > len(parts) {
		return nil, fmt.Errorf("%s: holds files and no %s; name another folder", dir, stateNote)
	}
	for _, path := range parts { // what a killed study was writing
		if err := os.Remove(path); err != nil {
			return nil, err
		}
	}
	if noted {
		return s, nil
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, err
	}
	return s, s.write(stateNote, []byte(note))
}

func (s *state) foreign(path string) error {
	return fmt.Errorf("%s: is no part of the state of a study; name a folder of its own", path)
}

// read returns what a file holds, without its checksum.
func (s *state) read(path string) ([]byte, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	head, body, ok := bytes.Cut(data, []byte("\n"))
	if !ok || string(head) != stateMark+fmt.Sprintf("%x", sha256.Sum256(body)) {
		return nil, fmt.Errorf("%s: is damaged, or was not written by this program; it is left as it is", path)
	}
	return body, nil
}

// write puts a file in place, whole or not at all, and on the disk.
func (s *state) write(name string, body []byte) (err error) {
	path := filepath.Join(s.dir, name)
	f, err := os.Create(path + statePart)
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(f, "%s%x\n%s", stateMark, sha256.Sum256(body), body)
	if err == nil {
		err = f.Sync()
	}
	if err = errors.Join(err, f.Close()); err != nil {
		return errors.Join(err, os.Remove(f.Name()))
	}
	if err = os.Rename(f.Name(), path); err != nil {
		return err
	}
	d, err := os.Open(s.dir)
	if err != nil {
		return err
	}
	return errors.Join(d.Sync(), d.Close())
}

// Load implements study.Store.
func (s *state) Load(name string) ([]byte, error) {
	path := filepath.Join(s.dir, name+stateRun)
	body, err := s.read(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	z, err := gzip.NewReader(bytes.NewReader(body))
	if err == nil {
		body, err = io.ReadAll(z)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return body, nil
}

// Save implements study.Store.
func (s *state) Save(name string, data []byte) error {
	var b bytes.Buffer
	z := gzip.NewWriter(&b)
	if _, err := z.Write(data); err != nil {
		return err
	}
	if err := z.Close(); err != nil {
		return err
	}
	return s.write(name+stateRun, b.Bytes())
}
