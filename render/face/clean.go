package face

import (
	_ "embed"
	"fmt"
	"strings"

	"golang.org/x/text/unicode/norm"
)

// Clean makes a text fit for drawing: valid UTF-8, composed letters (Ŝ as one rune),
// no controls, no marks of direction or of width zero, white space as spaces, and a
// rune that no face holds as its code, [U+6F22]. It returns such runes in the order of
// their first appearance.
func Clean(text string) (string, []rune) {
	if fit(text) {
		return text, nil
	}
	// What is dropped goes first: letters and accents it stood between are composed.
	text = norm.NFC.String(strings.Map(func(r rune) rune {
		switch {
		case r == '\t' || r == '\n' || r == '\r' || r == '\u2028' || r == '\u2029' || r == '\u0085':
			return ' '
		case r < 0x20 || 0x7F <= r && r < 0xA0 || invisible(r):
			return -1
		case r == '\u2011': // its hyphen is in few faces; that it does not break is for the layout
			return '-'
		}
		return r
	}, strings.ToValidUTF8(text, "\uFFFD")))
	var (
		b       strings.Builder
		missing []rune
		seen    map[rune]bool
	)
	b.Grow(len(text))
	for _, r := range text {
		if Drawable(r) {
			b.WriteRune(r)
			continue
		}
		fmt.Fprintf(&b, "[U+%04X]", r)
		if !seen[r] {
			if seen == nil {
				seen = map[rune]bool{}
			}
			seen[r] = true
			missing = append(missing, r)
		}
	}
	return b.String(), missing
}

// fit tells whether a text is printable ASCII and such, which most are.
func fit(text string) bool {
	for i := 0; i < len(text); i++ {
		if c := text[i]; c < 0x20 || c >= 0x7F {
			return false
		}
	}
	return true
}

// invisible tells whether r only steers the setting: joiners, soft hyphens, marks of
// direction, variation selectors.
func invisible(r rune) bool {
	switch {
	case r == 0xAD, r == 0x061C, 0x200B <= r && r <= 0x200F, 0x202A <= r && r <= 0x202E,
		0x2060 <= r && r <= 0x206F, 0xFE00 <= r && r <= 0xFE0F, r == 0xFEFF, 0xFFF9 <= r && r <= 0xFFFB:
		return true
	}
	return false
}

// Drawable tells whether any face of text or fallback holds r.
func Drawable(r rune) bool {
	return Get(Serif, false, false).Has(r) || Get(Any, false, false).Has(r)
}

var (
	//go:embed licences/liberation.txt
	liberationLicence string
	//go:embed licences/dejavu.txt
	dejavuLicence string
	//go:embed licences/go-fonts.txt
	packagingLicence string
)

// Licences gives the texts of the licences of all faces.
func Licences() string {
	return "Liberation Serif, Liberation Sans, Liberation Mono\n\n" + liberationLicence +
		"\n\nDejaVu Sans\n\n" + dejavuLicence +
		"\n\nThe Go packages that carry the faces\n\n" + packagingLicence
}
