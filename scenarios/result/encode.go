package result

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"reflect"
	"strings"
)

// A Result is any kind of result: *Run, *Batch, *Comparison, *Check or
// *Failures.
type Result interface {
	head() *Head
	kind() Kind
}

func (h *Head) head() *Head { return h }

func (*Run) kind() Kind        { return KindRun }
func (*Batch) kind() Kind      { return KindBatch }
func (*Comparison) kind() Kind { return KindComparison }
func (*Check) kind() Kind      { return KindCheck }
func (*Sizing) kind() Kind     { return KindSizing }
func (*Failures) kind() Kind   { return KindFailures }

// HeadOf returns the head of r.
func HeadOf(r Result) Head {
	h := *r.head()
	h.Format, h.Kind = Format, r.kind()
	return h
}

// Encode writes r as indented JSON that ends in a newline. Equal results give
// equal bytes; an empty list is written as [], never null. It fails, and names
// the place, when any number is NaN or infinite. It sets Format and Kind in r,
// makes nil lists empty and negative zeros zero, and changes nothing else.
func Encode(r Result) ([]byte, error) {
	h := r.head()
	h.Format, h.Kind = Format, r.kind()
	v := reflect.ValueOf(r).Elem()
	if at := notFinite(v, ""); at != "" {
		return nil, fmt.Errorf("result: %s is not a finite number", at)
	}
	normalise(v)
	b, err := json.MarshalIndent(r, "", "  ")
	if err != nil {
		return nil, fmt.Errorf("result: %w", err)
	}
	return append(onLines(b), '\n'), nil
}

// longList is the number of numbers from which a list stands on one line.
const longList = 16

// onLines puts long lists of numbers on a line each, for a series of a thousand
// bins in a column is no easier to read than in a row. b is indented JSON.
func onLines(b []byte) []byte {
	out := make([]byte, 0, len(b))
	for len(b) > 0 {
		at := bytes.Index(b, []byte("[\n")) // no string holds a bare newline
		if at < 0 {
			break
		}
		end := at + 1
		for end < len(b) && bytes.IndexByte([]byte("\n ,-+.0123456789eEnul"), b[end]) >= 0 {
			end++
		}
		list := b[at:end]
		if end == len(b) || b[end] != ']' || bytes.Count(list, []byte{','}) < longList {
			out = append(out, b[:at+1]...)
			b = b[at+1:]
			continue
		}
		out = append(out, b[:at]...)
		for _, c := range list {
			if c != '\n' && c != ' ' {
				out = append(out, c)
			}
		}
		b = b[end:]
	}
	return append(out, b...)
}

// Decode reads what Encode wrote. It refuses other formats and kinds, and
// skips keys it does not know.
func Decode(data []byte) (Result, error) {
	var h Head
	if err := json.Unmarshal(data, &h); err != nil {
		return nil, fmt.Errorf("result: %w", err)
	}
	if h.Format != Format {
		return nil, fmt.Errorf("result: format %d, want %d", h.Format, Format)
	}
	var r Result
	switch h.Kind {
	case KindRun:
		r = new(Run)
	case KindBatch:
		r = new(Batch)
	case KindComparison:
		r = new(Comparison)
	case KindCheck:
		r = new(Check)
	case KindSizing:
		r = new(Sizing)
	case KindFailures:
		r = new(Failures)
	default:
		return nil, fmt.Errorf("result: kind %q is none of run, batch, comparison, check, failures, sizing", h.Kind)
	}
	if err := json.Unmarshal(data, r); err != nil {
		return nil, fmt.Errorf("result: %w", err)
	}
	return r, nil
}

// DecodeRun reads a file that must hold a Run.
func DecodeRun(data []byte) (*Run, error) {
	r, err := Decode(data)
	if err != nil {
		return nil, err
	}
	run, ok := r.(*Run)
	if !ok {
		return nil, errors.New("result: the file holds a " + string(r.kind()) + ", not a run")
	}
	return run, nil
}

// notFinite returns the path of the first float under v that JSON cannot
// hold, or "".
func notFinite(v reflect.Value, path string) string {
	switch v.Kind() {
	case reflect.Float64:
		if f := v.Float(); math.IsNaN(f) || math.IsInf(f, 0) {
			return path
		}
	case reflect.Pointer:
		if !v.IsNil() {
			return notFinite(v.Elem(), path)
		}
	case reflect.Slice:
		for i := range v.Len() {
			if at := notFinite(v.Index(i), fmt.Sprintf("%s[%d]", path, i)); at != "" {
				return at
			}
		}
	case reflect.Struct:
		for i := range v.NumField() {
			if at := notFinite(v.Field(i), join(path, v.Type().Field(i))); at != "" {
				return at
			}
		}
	}
	return ""
}

// join extends path by the key of f as it stands in a file.
func join(path string, f reflect.StructField) string {
	if f.Anonymous {
		return path
	}
	key, _, _ := strings.Cut(f.Tag.Get("json"), ",")
	if key == "" {
		key = f.Name
	}
	if path == "" {
		return key
	}
	return path + "." + key
}

// normalise makes every nil list under v that is always written an empty one,
// and every negative zero a zero.
func normalise(v reflect.Value) {
	switch v.Kind() {
	case reflect.Float64:
		if v.Float() == 0 {
			v.SetFloat(0)
		}
	case reflect.Pointer:
		if !v.IsNil() {
			normalise(v.Elem())
		}
	case reflect.Slice:
		for i := range v.Len() {
			normalise(v.Index(i))
		}
	case reflect.Struct:
		for i := range v.NumField() {
			f := v.Field(i)
			omitted := strings.Contains(v.Type().Field(i).Tag.Get("json"), ",omit")
			if f.Kind() == reflect.Slice && f.IsNil() && !omitted {
				f.Set(reflect.MakeSlice(f.Type(), 0, 0))
			}
			normalise(f)
		}
	}
}

// Stamp writes into r which program made it.
func Stamp(r Result, t Tool) { r.head().Tool = t }
