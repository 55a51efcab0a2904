package main

import (
	"bytes"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// A check prints the model minus what was measured; a faulty table is told of
// at its row.
func TestCheckMeasured(t *testing.T) {
	check := func(rows string) (status int, out, errOut string) {
		path := filepath.Join(t.TempDir(), "m.csv")
		if err := os.WriteFile(path, []byte("what,of,from,to,value\n"+rows), 0o644); err != nil {
			t.Fatal(err)
		}
		var o, e bytes.Buffer
		env := osEnv(wired{})
		env.Out, env.ErrOut = &o, &e
		env.IsTTY, env.Environ = func(io.Writer) bool { return false }, nil
		status = Main(t.Context(), env, []string{"check", "--measured", path})
		return status, o.String(), e.String()
	}
	status, out, errOut := check("link,th,tarn,holm,1Gbps\ndelay,video,tarn,ness,4ms\n")
	if status != 0 || !strings.Contains(out, "model - measured") || !strings.Contains(out, "\nlink   th") || !strings.Contains(out, "\ndelay  video") {
		t.Errorf("status %d, %s\n%s", status, errOut, out)
	}
	if status, _, errOut = check("link,th,tarn,home,1Gbps\n"); status == 0 || !strings.Contains(errOut, `m.csv:2:14: to: no site is called "home"; write one of tarn, holm, `) {
		t.Errorf("status %d, %s", status, errOut)
	}
}
