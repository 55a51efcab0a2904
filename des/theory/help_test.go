package theory

import (
	"math"
	"strconv"
	"strings"
	"testing"
)

// digits fails unless got, rounded as want is printed, is want: it allows half
// a unit of want's last digit, and a hundredth more for ties. Values whose
// last printed digits are zeros for being exact go through [exact].
func digits(t *testing.T, what string, got float64, want string) {
	t.Helper()
	w, err := strconv.ParseFloat(want, 64)
	if err != nil {
		t.Fatal(err)
	}
	mantissa, exponent, _ := strings.Cut(want, "e")
	_, frac, _ := strings.Cut(mantissa, ".")
	e := 0
	if exponent != "" {
		if e, err = strconv.Atoi(exponent); err != nil {
			t.Fatal(err)
		}
	}
	if limit := 0.505 * math.Pow(10, float64(e-len(frac))); !(math.Abs(got-w) <= limit) {
		t.Errorf("%s: %.10g, want %s", what, got, want)
	}
}

// exact fails unless got is want to 1e-12 of itself.
func exact(t *testing.T, what string, got, want float64) {
	t.Helper()
	if got != want && !(math.Abs(got-want) <= 1e-12*math.Abs(want)) {
		t.Errorf("%s: %.15g, want %.15g", what, got, want)
	}
}

// panics fails unless each f panics with this package's prefix.
func panics(t *testing.T, fs map[string]func()) {
	t.Helper()
	for name, f := range fs {
		func() {
			defer func() {
				if s, _ := recover().(string); !strings.HasPrefix(s, "theory: ") {
					t.Errorf("%s: panic %q, want one of theory", name, s)
				}
			}()
			f()
		}()
	}
}
