package face

import (
	"math"
	"slices"
	"strings"
	"sync"
	"testing"
	"unicode/utf8"

	"golang.org/x/image/font/opentype"
)

// The second road: golang.org/x/image's own measuring of the same file, at a size
// where rounding to its 1/64 is below the rounding to 1/1000 em.
func TestWidthAgreesWithOpentype(t *testing.T) {
	const size = 2048
	text := "Gain of barrows, AVATAR To. Wage (0.42 kg) — 12 ± 3 µg, Żółć α ≤ β"
	for i := 0; i < Count(); i++ {
		f := faces()[i]
		parsed, err := opentype.Parse(f.TTF())
		if err != nil {
			t.Fatal(err)
		}
		other, err := opentype.NewFace(parsed, &opentype.FaceOptions{Size: size, DPI: 72})
		if err != nil {
			t.Fatal(err)
		}
		want := 0.0
		var before rune
		for _, r := range text {
			a, ok := other.GlyphAdvance(r)
			if !ok {
				t.Fatalf("%s lacks %q", f.Name, r)
			}
			want += float64(a) / 64
			if before > ' ' && r > ' ' && before < 0x7F && r < 0x7F && f.Family != Mono {
				want += float64(other.Kern(before, r)) // it gives font units, of which there are size to the em
			}
			before = r
		}
		if got := f.Width(text, size); math.Abs(got-want) > float64(utf8.RuneCountInString(text))*size/1000 {
			t.Errorf("%s: width %.1f, opentype says %.1f", f.Name, got, want)
		}
	}
}

func TestMetrics(t *testing.T) {
	// From the hhea and OS/2 tables of Liberation Serif 2: ascender 1825, descender
	// -443, of 2048 to the em.
	f := Get(Serif, false, false)
	if a, d := f.Ascent(2048), f.Descent(2048); a != 1825 || d != 443 {
		t.Errorf("ascent %v, descent %v", a, d)
	}
	if c := f.CapHeight(10); c < 6 || c > 7.5 {
		t.Errorf("cap height %v", c)
	}
}

func TestRuns(t *testing.T) {
	f := Get(Serif, false, false)
	tests := []struct {
		text string
		want string
	}{
		{"", ""},
		{"plain", "serif:plain"},
		{"a ∈ b", "serif:a |any:∈|serif: b"},
		{"kg ha⁻¹ d", "serif:kg ha|any:⁻¹|serif: d"}, // the cluster is not torn
		{"m² x", "serif:m² x"},
		{"∈∉", "any:∈∉"},
	}
	for _, test := range tests {
		var got []string
		for _, run := range f.Runs(test.text) {
			got = append(got, run.Face.Name+":"+run.Text)
		}
		if g := strings.Join(got, "|"); g != test.want {
			t.Errorf("%q: %s, want %s", test.text, g, test.want)
		}
	}
	if got := Get(Sans, true, true).Runs("∈")[0].Face; !got.Bold || got.Family != Any {
		t.Errorf("fallback of bold italic is %s", got.Name)
	}
	if got := Get(Sans, false, true).Runs("א"); got[0].Face.Name != "sansitalic" && got[0].Face.Name != "any" {
		t.Errorf("Hebrew in italic falls to %s", got[0].Face.Name)
	}
}

func TestClean(t *testing.T) {
	tests := []struct {
		in, want string
		missing  string
	}{
		{"plain", "plain", ""},
		{"a\tb\nc", "a b c", ""},
		{"a\x00b\x1bc\x7f", "abc", ""},
		{"bad \xff\xfe end", "bad \uFFFD end", ""},
		{"x\u202Ey\u2066z\u200F", "xyz", ""},
		{"soft\u00ADhy\u200Bphen", "softhyphen", ""},
		{"S\u0302", "Ŝ", ""},
		{"non\u2011breaking", "non-breaking", ""},
		{"漢 ok 漢字", "[U+6F22] ok [U+6F22][U+5B57]", "漢字"},
		{"pig 🐖", "pig [U+1F416]", "🐖"},
		{"kg ha⁻¹ α ≤ − ᵃ", "kg ha⁻¹ α ≤ − ᵃ", ""},
	}
	for _, test := range tests {
		got, missing := Clean(test.in)
		if got != test.want || string(missing) != test.missing {
			t.Errorf("Clean(%q) = %q, %q; want %q, %q", test.in, got, string(missing), test.want, test.missing)
		}
	}
}

// The runes that reports are made of must be there, whatever the style asked for.
func TestCoverage(t *testing.T) {
	const need = "αβγδεζηθικλμνξοπρστυφχψωΓΔΘΛΞΠΣΦΨΩ×±≤≥≠≈−–—…·•°µ√∞∑∏∫∂∈∅∪⊂⇒∀∃∝∼≪≫∗⋅" +
		"⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻⁼ⁱⁿ₀₁₂₃₄₅₆₇₈₉₊₋₌ᵃᵇᶜᵈᵉᶠᵍʰʲᵏˡᵐ†‡§¶✓☐●◆♂♀№€£‰" +
		"\u00A0\u2002\u2003\u2007\u2009\u200A\u202FĄČĐĘĞİŁŐŘŞŠŽÿжЯтếộ"
	for i := 0; i < Count(); i++ {
		for _, r := range need {
			if f := faces()[i]; !f.holder(r).Has(r) {
				t.Errorf("%s and its fallbacks lack %q (%U)", f.Name, r, r)
			}
		}
	}
}

func TestKern(t *testing.T) {
	f := Get(Serif, false, false)
	if f.Kern('A', 'V') >= 0 {
		t.Errorf("AV is not drawn together: %d", f.Kern('A', 'V'))
	}
	if f.Kern('x', ' ') != 0 || f.Kern(0, 'x') != 0 || Get(Mono, false, false).Kern('A', 'V') != 0 {
		t.Error("kerned where nothing is to be kerned")
	}
}

func TestTogether(t *testing.T) {
	var wait sync.WaitGroup
	widths := make([]float64, 8)
	for i := range widths {
		wait.Go(func() { widths[i] = Get(Mono, true, false).Width("Together: ∈ 漢 AV", 10) })
	}
	wait.Wait()
	if slices.Max(widths) != slices.Min(widths) {
		t.Error(widths)
	}
}

func TestLicences(t *testing.T) {
	for _, want := range []string{"SIL OPEN FONT LICENSE", "Bitstream Vera", "Liberation", "DejaVu"} {
		if !strings.Contains(Licences(), want) {
			t.Errorf("licences lack %q", want)
		}
	}
}

func FuzzClean(f *testing.F) {
	f.Add("a\xff🐖\u202Eb⁻¹")
	f.Fuzz(func(t *testing.T, s string) {
		clean, _ := Clean(s)
		again, missing := Clean(clean)
		if again != clean || len(missing) > 0 || !utf8.ValidString(clean) {
			t.Errorf("%q cleans to %q, then to %q", s, clean, again)
		}
		face := Get(Serif, true, true)
		n := 0
		for _, run := range face.Runs(clean) {
			n += len(run.Text)
			for _, r := range run.Text {
				if !run.Face.Has(r) {
					t.Errorf("%s was given %U", run.Face.Name, r)
				}
			}
		}
		if n != len(clean) {
			t.Errorf("runs of %q lose text", clean)
		}
	})
}
