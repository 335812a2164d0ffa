package web

import (
	"math"
	"regexp"
	"strconv"
	"testing"
)

// tokens reads the light-dark() pairs of the token sheet.
func tokens(t *testing.T) map[string][2]string {
	t.Helper()
	b, err := embedded.ReadFile("static/tokens.css")
	if err != nil {
		t.Fatal(err)
	}
	pairs := map[string][2]string{}
	for _, m := range regexp.MustCompile(`--([a-z]+): light-dark\((#[0-9a-f]{6}), (#[0-9a-f]{6})\);`).FindAllStringSubmatch(string(b), -1) {
		pairs[m[1]] = [2]string{m[2], m[3]}
	}
	if all := regexp.MustCompile(`light-dark\(#`).FindAll(b, -1); len(all) != len(pairs) || len(pairs) < 10 {
		t.Fatalf("read %d of %d colour tokens", len(pairs), len(all))
	}
	return pairs
}

// luminance and contrast are WCAG 2.2's definitions of relative luminance and contrast ratio.
func luminance(hex string) float64 {
	sum := 0.0
	for i, weight := range []float64{0.2126, 0.7152, 0.0722} {
		n, err := strconv.ParseUint(hex[1+2*i:3+2*i], 16, 8)
		if err != nil {
			panic(err)
		}
		c := float64(n) / 255
		if c <= 0.04045 {
			c /= 12.92
		} else {
			c = math.Pow((c+0.055)/1.055, 2.4)
		}
		sum += weight * c
	}
	return sum
}

func contrast(a, b string) float64 {
	la, lb := luminance(a), luminance(b)
	return (max(la, lb) + 0.05) / (min(la, lb) + 0.05)
}

func TestContrastFormula(t *testing.T) {
	// WCAG 2.2: black on white is 21:1, a colour on itself 1:1. #767676 on white is the well-known lightest grey
	// that passes 4.5:1 (4.54; figure from memory).
	for _, c := range []struct {
		a, b string
		want float64
	}{{"#000000", "#ffffff", 21}, {"#9d2f63", "#9d2f63", 1}, {"#767676", "#ffffff", 4.54}} {
		if got := contrast(c.a, c.b); math.Abs(got-c.want) > 0.005 {
			t.Errorf("contrast(%s, %s) = %.3f, want %.2f", c.a, c.b, got, c.want)
		}
	}
}

func TestTokensHaveContrast(t *testing.T) {
	pairs := tokens(t)
	themes := []string{"light", "dark"}
	check := func(fore, back string, least float64) {
		for i, theme := range themes {
			if got := contrast(pairs[fore][i], pairs[back][i]); got < least {
				t.Errorf("%s: --%s on --%s is %.2f:1, needs %.1f:1", theme, fore, back, got, least)
			}
		}
	}
	for _, back := range []string{"paper", "sheet", "press"} {
		for _, text := range []string{"ink", "soft", "before", "after", "held"} {
			check(text, back, 4.5) // WCAG 2.2, 1.4.3
		}
	}
	for _, back := range []string{"paper", "sheet"} {
		check("edge", back, 3) // WCAG 2.2, 1.4.11: borders of controls, outlines of what is not levelled
	}
	check("paper", "ink", 4.5)   // the words on a main button …
	check("paper", "after", 4.5) // … and while it is pointed at
	check("sheet", "after", 3)   // the notch in a filled spine
}

// Shape tells the kinds of mark apart first. Their colours must still differ to eyes that confuse hues: a
// difference of 10 in CIELAB is clear at a glance (common practice, no source).
func TestMarksDifferToEveryEye(t *testing.T) {
	pairs := tokens(t)
	for i, theme := range []string{"light", "dark"} {
		for _, p := range [][2]string{{"before", "after"}, {"before", "held"}, {"after", "held"}} {
			for name, eye := range eyes {
				a, b := lab(pairs[p[0]][i], eye), lab(pairs[p[1]][i], eye)
				if d := math.Hypot(math.Hypot(a[0]-b[0], a[1]-b[1]), a[2]-b[2]); d < 10 {
					t.Errorf("%s: --%s and --%s differ by %.1f in CIELAB to %s", theme, p[0], p[1], d, name)
				}
			}
		}
	}
}

// eyes are the matrices, on linear RGB, of Machado, Oliveira and Fernandes, "A Physiologically-based Model for
// Simulation of Color Vision Deficiency" (2009), severity 1.0 (figures from memory; each row sums to 1).
var eyes = map[string][3][3]float64{
	"full colour vision":        {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
	"an eye without long cones": {{0.152286, 1.052583, -0.204868}, {0.114503, 0.786281, 0.099216}, {-0.003882, -0.048116, 1.051998}},
	"one without medium cones":  {{0.367322, 0.860646, -0.227968}, {0.280085, 0.672501, 0.047413}, {-0.011820, 0.042940, 0.968881}},
	"one without short cones":   {{1.255528, -0.076749, -0.178779}, {-0.078411, 0.930809, 0.147602}, {0.004733, 0.691367, 0.303900}},
}

// lab is CIELAB (CIE 15) of an sRGB colour under D65, as an eye sees it.
func lab(hex string, eye [3][3]float64) [3]float64 {
	var rgb, f [3]float64
	for i, row := range eye {
		for j, k := range row {
			rgb[i] += k * linear(hex, j)
		}
	}
	toXYZ := [3][3]float64{{0.4124, 0.3576, 0.1805}, {0.2126, 0.7152, 0.0722}, {0.0193, 0.1192, 0.9505}} // IEC 61966-2-1
	for i, white := range [3]float64{0.9505, 1, 1.089} {
		v := 0.0
		for j := range rgb {
			v += toXYZ[i][j] * rgb[j]
		}
		if v /= white; v > 216.0/24389 {
			f[i] = math.Cbrt(v)
		} else {
			f[i] = (24389.0/27*v + 16) / 116
		}
	}
	return [3]float64{116*f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])}
}

// linear is channel i of a colour, freed of sRGB's curve.
func linear(hex string, i int) float64 {
	only := []byte("#000000")
	copy(only[1+2*i:3+2*i], hex[1+2*i:3+2*i])
	return luminance(string(only)) / []float64{0.2126, 0.7152, 0.0722}[i]
}
