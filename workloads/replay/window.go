package replay

import (
	"errors"
	"io"
)

// Sizes of windows.
const (
	windowSize = 64 << 10
	mostPeek   = 4 << 10 // bytes that can be looked at in one piece
)

// window is a place in a file of a fixed size and some of what follows it.
type window struct {
	r    io.ReaderAt
	size int64 // of the file
	buf  []byte
	off  int64 // in the file, of buf[0]
	pos  int   // in buf, of the place
	n    int   // bytes of buf that are read
	held bool  // buf holds the whole file and is shared by all that read it
	err  *Fault
}

// newWindow returns a window at the beginning of a file; held is the file, or
// nil if it is to be read through r.
func newWindow(r io.ReaderAt, size int64, held []byte) window {
	if held != nil {
		return window{size: size, buf: held, n: len(held), held: true}
	}
	return window{r: r, size: size, buf: make([]byte, windowSize)}
}

// left is the number of bytes from the place to the end.
func (w *window) left() int64 { return w.size - w.off - int64(w.pos) }

// peek returns the next k bytes, which are at most mostPeek, or what is left of
// the file if that is less. After a fault it returns nothing.
func (w *window) peek(k int) []byte {
	if w.n-w.pos < k && !w.held {
		w.fill()
	}
	return w.buf[w.pos:min(w.n, w.pos+k)]
}

// fill reads on.
func (w *window) fill() {
	if w.off+int64(w.n) >= w.size || w.err != nil {
		return
	}
	w.n = copy(w.buf, w.buf[w.pos:w.n])
	w.off += int64(w.pos)
	w.pos = 0
	want := int(min(int64(len(w.buf)), w.size-w.off))
	got, err := w.r.ReadAt(w.buf[w.n:want], w.off+int64(w.n))
	if w.n += got; w.n == want {
		return
	}
	w.pos = w.n
	if errors.Is(err, io.EOF) || err == nil {
		w.err = changed()
	} else {
		w.err = fault("", "", "cannot be read: %v", err)
	}
}

// skip moves the place on by k bytes, at most to the end.
func (w *window) skip(k int64) {
	k = min(k, w.left())
	if k <= int64(w.n-w.pos) {
		w.pos += int(k)
		return
	}
	w.off += int64(w.pos) + k
	w.pos, w.n = 0, 0
}

// rewind moves the place to the beginning.
func (w *window) rewind() {
	if w.off > 0 {
		w.off, w.n = 0, 0
	}
	w.pos = 0
}

// clone returns a window that shares nothing that changes.
func (w *window) clone() window {
	c := *w
	if !w.held {
		c.buf = make([]byte, len(w.buf))
		copy(c.buf, w.buf[:w.n])
	}
	return c
}

// changed is the fault of a file that is not what Open has seen.
func changed() *Fault {
	return fault("", "leave it alone until the run is over", "the file was changed while it was in use")
}
