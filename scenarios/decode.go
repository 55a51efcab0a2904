package scenarios

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"reflect"
	"strconv"
	"strings"

	"github.com/go-viper/mapstructure/v2"
	"github.com/spf13/viper"
	"go.yaml.in/yaml/v3"

	"ferrule/des"
	"ferrule/nodes"
)

// read has viper read the file and lay the options over it, and decodes the
// outcome into raw. What cannot be decoded is noted and left out.
func (t *tree) read(data []byte, changed []string, raw any) {
	// Names may hold dots, so keys are split at a character that no name has.
	v := viper.NewWithOptions(viper.KeyDelimiter("\x1f"))
	v.SetConfigType("yaml")
	if err := v.ReadConfig(bytes.NewReader(data)); err != nil {
		var parse viper.ConfigParseError
		if errors.As(err, &parse) {
			err = parse.Unwrap()
		}
		t.syntax(err)
		return
	}
	for _, section := range changed {
		var value any
		if p := t.top().field(section); p.given() {
			if err := p.node.Decode(&value); err != nil {
				t.syntax(err)
				return
			}
		}
		v.Set(section, value)
	}
	err := v.Unmarshal(raw, viper.DecodeHook(mapstructure.DecodeHookFuncValue(leaf)), func(c *mapstructure.DecoderConfig) {
		c.WeaklyTypedInput = false
		c.ErrorUnused = true
	})
	t.decodeErrors(err)
}

// decodeErrors notes every leaf of an error of mapstructure at its place.
func (t *tree) decodeErrors(err error) {
	if err == nil {
		return
	}
	if many, ok := err.(interface{ Unwrap() []error }); ok {
		for _, e := range many.Unwrap() {
			t.decodeErrors(e)
		}
		return
	}
	if d, ok := err.(*mapstructure.DecodeError); ok {
		if t.decodeLeaf(d) {
			return
		}
	}
	if inner := errors.Unwrap(err); inner != nil {
		t.decodeErrors(inner)
		return
	}
	t.faults.add(Pos{File: t.file}, "", err.Error(), "")
}

// decodeLeaf notes d if it is about one value, not a bundle of others.
func (t *tree) decodeLeaf(d *mapstructure.DecodeError) bool {
	p := t.path(d.Name())
	var f *fault
	if errors.As(d, &f) {
		for _, key := range f.under {
			var i int
			if _, err := fmt.Sscanf(key, "[%d]", &i); err == nil {
				p = p.item(i)
			} else {
				p = p.field(key)
			}
		}
		pos := p.pos()
		if f.onKey {
			pos = p.keyPos()
		}
		t.faults.add(pos, p.key(), f.msg, f.hint)
		return true
	}
	var inner *mapstructure.DecodeError
	if errors.As(d.Unwrap(), &inner) {
		return false
	}
	p.fault("", "%s", d.Unwrap())
	return true
}

// path finds the place that mapstructure calls name, such as "links[2].rate".
func (t *tree) path(name string) *place {
	p := t.top()
	for name != "" {
		if name[0] == '[' {
			end := strings.IndexByte(name, ']')
			i, err := strconv.Atoi(name[1:max(1, end)])
			if err != nil {
				return p
			}
			p, name = p.item(i), strings.TrimPrefix(name[end+1:], ".")
			continue
		}
		end := len(name)
		if i := strings.IndexByte(name, '['); i >= 0 {
			end = i
		}
		// Keys such as "delay-p99.9" hold a dot: take the longest that is there.
		key := name[:end]
		for {
			if q := p.field(key); q.given() || !strings.Contains(key, ".") {
				p = q
				break
			}
			key = key[:strings.LastIndexByte(key, '.')]
		}
		name = strings.TrimPrefix(name[len(key):], ".")
	}
	return p
}

// leaf is the decode hook for every value that is not a mapping or a list.
func leaf(from, to reflect.Value) (any, error) {
	data := from.Interface()
	if out, f, done := decodeValue(data, to.Type()); done {
		if f != nil {
			return nil, f
		}
		return out, nil
	}
	return data, nil
}

// decodeValue decodes data for type typ; done is false if typ is no leaf.
func decodeValue(data any, typ reflect.Type) (out any, f *fault, done bool) {
	switch typ {
	case reflect.TypeFor[des.Time]():
		v, f := timeMeasure.positive(data)
		return des.Time(v), f, true
	case reflect.TypeFor[nodes.Rate]():
		v, f := rateMeasure.positive(data)
		return nodes.Rate(v), f, true
	case reflect.TypeFor[nodes.Length]():
		v, f := lengthMeasure.decode(data)
		return nodes.Length(v), f, true
	case reflect.TypeFor[nodes.Bytes]():
		v, f := bytesMeasure.positive(data)
		return nodes.Bytes(v), f, true
	case reflect.TypeFor[timeLaw]():
		s, f := timeMeasure.law(data)
		return timeLaw(s), f, true
	case reflect.TypeFor[byteLaw]():
		s, f := bytesMeasure.law(data)
		return byteLaw(s), f, true
	case reflect.TypeFor[warmUp]():
		if data == "auto" {
			return warmUp{Auto: true}, nil, true
		}
		v, f := timeMeasure.positive(data)
		if f != nil {
			f.hint += ", or auto"
		}
		return warmUp{Length: des.Time(v)}, f, true
	case reflect.TypeFor[buffer]():
		b, f := decodeBuffer(data)
		return b, f, true
	case reflect.TypeFor[ratio]():
		v, f := decodeRatio(data)
		return ratio(v), f, true
	case reflect.TypeFor[percent]():
		v, f := decodePercent(data)
		return v, f, true
	case reflect.TypeFor[frequency]():
		v, f := suffixed(fmt.Sprint(data), "/s", "a number per second")
		return frequency(v), f, true
	case reflect.TypeFor[codePoint]():
		c, f := decodeCodePoint(data)
		return c, f, true
	}
	return decodePlain(data, typ)
}

// decodePlain decodes words, whole numbers and switches.
func decodePlain(data any, typ reflect.Type) (out any, f *fault, done bool) {
	switch typ.Kind() {
	case reflect.String:
		s, ok := data.(string)
		if !ok {
			return nil, &fault{msg: fmt.Sprintf("%v is not a word", data), hint: fmt.Sprintf("write it in quotes: \"%v\"", data)}, true
		}
		return s, nil, true
	case reflect.Bool:
		b, ok := data.(bool)
		if !ok {
			return nil, &fault{msg: fmt.Sprintf("\"%v\" is neither true nor false", data), hint: "write true or false"}, true
		}
		return b, nil, true
	case reflect.Int, reflect.Uint64:
		x, f := decodeWhole(data)
		if f == nil && typ.Kind() == reflect.Uint64 {
			if x < 0 {
				return nil, &fault{msg: fmt.Sprintf("%d is negative", x), hint: "write a whole number at or above 0"}, true
			}
			return uint64(x), nil, true
		}
		return int(x), f, true
	default:
		return nil, nil, false
	}
}

// decodeWhole reads a whole number that a float64 can hold exactly.
func decodeWhole(data any) (int64, *fault) {
	const most = 1 << 53
	switch x := data.(type) {
	case int:
		if x >= -most && x <= most {
			return int64(x), nil
		}
	case float64:
		if x != math.Trunc(x) {
			return 0, &fault{msg: fmt.Sprintf("%v is not a whole number", x), hint: "write one without decimals"}
		}
		if math.Abs(x) <= most {
			return int64(x), nil
		}
	case int64, uint64:
	default:
		return 0, &fault{msg: fmt.Sprintf("\"%v\" is not a whole number", x), hint: "write digits without a unit"}
	}
	return 0, &fault{msg: fmt.Sprintf("%v is out of range", data), hint: "write a whole number of at most 2^53"}
}

// positive decodes a quantity and refuses negative ones.
func (m *measure) positive(data any) (int64, *fault) {
	v, f := m.decode(data)
	if f == nil && v < 0 {
		f = &fault{msg: fmt.Sprintf("%q is negative", data), hint: "write a value at or above 0"}
	}
	return v, f
}

// decodeBuffer reads a buffer as time, as data, or as a number of packets.
func decodeBuffer(data any) (buffer, *fault) {
	if s, ok := data.(string); ok {
		if num, name := splitNumber(s); name != "" {
			if name == "packets" || name == "packet" {
				n, err := strconv.Atoi(num)
				if err != nil || n < 1 || n > 1e9 {
					return buffer{}, &fault{msg: fmt.Sprintf("%q is not a number of packets", s), hint: "write a whole number from 1, such as 9 packets"}
				}
				return buffer{Packets: n}, nil
			}
			if _, ok := bytesMeasure.find(name); ok {
				v, f := bytesMeasure.positive(data)
				return buffer{Bytes: nodes.Bytes(v)}, f
			}
		}
	}
	v, f := timeMeasure.positive(data)
	if f != nil && f.hint != "" {
		f.hint += "; an amount of data, such as 64kB; or 9 packets"
	}
	return buffer{Time: des.Time(v)}, f
}

// decodePercent reads a percentage; a small number without its sign was most
// likely meant as a factor.
func decodePercent(data any) (percent, *fault) {
	const factor = 10
	v, f := suffixed(fmt.Sprint(data), "%", "a percentage")
	if x, bad := plainNumber(data); bad == nil && f != nil && x > 0 && x <= factor {
		f.hint = fmt.Sprintf("write %g%%", x*100)
	}
	return percent(v / 100), f
}

// decodeRatio reads a number in [0, 1], or a percentage.
func decodeRatio(data any) (float64, *fault) {
	var v float64
	var f *fault
	if s, ok := data.(string); ok {
		v, f = suffixed(s, "%", "a ratio")
		v /= 100
	} else {
		v, f = plainNumber(data)
	}
	if f != nil {
		f.hint = "write a number from 0 to 1, or a percentage"
	} else if v < 0 || v > 1 {
		f = &fault{msg: fmt.Sprintf("%v is out of range", data), hint: "write a number from 0 to 1, or a percentage"}
	}
	return v, f
}

// marshal writes the tree out again, once something was taken out of it.
func (t *tree) marshal() ([]byte, error) {
	return yaml.Marshal(t.root)
}
