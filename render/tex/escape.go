package tex

import (
	"strings"
	"unicode"
	"unicode/utf8"

	"golang.org/x/text/unicode/norm"

	"penwright/render/doc"
)

// signs gives what stands for a sign in running text. Letters with accents that the T1
// encoding has stand for themselves.
var signs = map[rune]string{
	'\\': `\textbackslash{}`, '{': `\{`, '}': `\}`, '$': `\$`, '&': `\&`, '#': `\#`, '%': `\%`, '_': `\_`,
	'^': `\textasciicircum{}`, '~': `\textasciitilde{}`, '<': `\textless{}`, '>': `\textgreater{}`, '|': `\textbar{}`,
	'"': `\textquotedbl{}`, '\'': `\textquotesingle{}`, '`': `\textasciigrave{}`, '[': `{[}`, ']': `{]}`, '*': `{*}`,
	'\n': " ", '\t': " ", '\u2028': " ", '\u2029': " ",

	// Spaces and hyphens.
	'\u00a0': "~", '\u202f': `\,`, '\u2009': `\,`, '\u200a': `\,`, '\u2004': `\,`, '\u2005': `\,`, '\u2006': `\,`, '\u2008': `\,`, '\u205f': `\,`,
	'\u2000': `\enspace{}`, '\u2002': `\enspace{}`, '\u2001': `\quad{}`, '\u2003': `\quad{}`, '\u3000': `\quad{}`, '\u2007': `\phantom{0}`,
	'\u00ad': `\-`, '\u200b': `\allowbreak{}`, '\u200c': "{}", '\u200d': "{}", '\u2060': "{}",
	'\u2010': "-", '\u2011': `\mbox{-}`, '\u2012': "--", '–': "--", '—': "---", '\u2015': "---",

	// Quotes, points and signs of prose.
	'‘': `\textquoteleft{}`, '’': "'", '‚': `\quotesinglbase{}`, '“': `\textquotedblleft{}`, '”': `\textquotedblright{}`, '„': `\quotedblbase{}`,
	'‹': `\guilsinglleft{}`, '›': `\guilsinglright{}`, '«': `\guillemotleft{}`, '»': `\guillemotright{}`,
	'…': `\ldots{}`, '•': `\textbullet{}`, '·': `\textperiodcentered{}`, '‧': `\textperiodcentered{}`, '†': `\textdagger{}`, '‡': `\textdaggerdbl{}`,
	'§': `\S{}`, '¶': `\P{}`, '©': `\textcopyright{}`, '®': `\textregistered{}`, '™': `\texttrademark{}`, '℠': `\textservicemark{}`,
	'°': `\textdegree{}`, '℃': `\textcelsius{}`, '℉': `\textdegree{}F`, 'º': `\textordmasculine{}`, 'ª': `\textordfeminine{}`, 'µ': `\textmu{}`, 'Ω': `\textohm{}`, '℧': `\textmho{}`,
	'‰': `\textperthousand{}`, '‱': `\textpertenthousand{}`, '№': `\textnumero{}`, '℮': `\textestimated{}`, '※': `\textreferencemark{}`,
	'€': `\texteuro{}`, '£': `\textsterling{}`, '¢': `\textcent{}`, '¥': `\textyen{}`, '¤': `\textcurrency{}`, '₩': `\textwon{}`, '₤': `\textlira{}`, '₦': `\textnaira{}`, '₫': `\textdong{}`, 'ƒ': `\textflorin{}`,
	'¦': `\textbrokenbar{}`, '¨': `\textasciidieresis{}`, '¯': `\textasciimacron{}`, '´': `\textasciiacute{}`, '¸': `\c{}`, '¡': `\textexclamdown{}`, '¿': `\textquestiondown{}`,
	'½': `\textonehalf{}`, '¼': `\textonequarter{}`, '¾': `\textthreequarters{}`, '⁄': `\textfractionsolidus{}`, '−': `$-$`,
	'ﬀ': "ff", 'ﬁ': "fi", 'ﬂ': "fl", 'ﬃ': "ffi", 'ﬄ': "ffl", 'ı': `\i{}`, 'ȷ': `\j{}`,

	// Signs of mathematics.
	'×': `$\times$`, '÷': `$\div$`, '±': `$\pm$`, '∓': `$\mp$`, '≤': `$\leq$`, '≥': `$\geq$`, '⩽': `$\leq$`, '⩾': `$\geq$`, '≠': `$\neq$`, '≈': `$\approx$`, '≡': `$\equiv$`,
	'≅': `$\cong$`, '∼': `$\sim$`, '≃': `$\simeq$`, '≪': `$\ll$`, '≫': `$\gg$`, '∝': `$\propto$`, '∞': `$\infty$`, '∂': `$\partial$`, '∇': `$\nabla$`, '√': `$\surd$`,
	'∑': `$\Sigma$`, '∏': `$\Pi$`, '∫': `$\smallint$`, '∈': `$\in$`, '∋': `$\ni$`, '⊂': `$\subset$`, '⊃': `$\supset$`, '⊆': `$\subseteq$`, '⊇': `$\supseteq$`, '∪': `$\cup$`, '∩': `$\cap$`,
	'∅': `$\emptyset$`, '∀': `$\forall$`, '∃': `$\exists$`, '¬': `$\neg$`, '∧': `$\wedge$`, '∨': `$\vee$`, '⊕': `$\oplus$`, '⊗': `$\otimes$`, '⊥': `$\perp$`, '⟂': `$\perp$`, '∥': `$\parallel$`, '∠': `$\angle$`,
	'→': `$\rightarrow$`, '←': `$\leftarrow$`, '↑': `$\uparrow$`, '↓': `$\downarrow$`, '↔': `$\leftrightarrow$`, '⇒': `$\Rightarrow$`, '⇐': `$\Leftarrow$`, '⇔': `$\Leftrightarrow$`,
	'∗': `$\ast$`, '⋅': `$\cdot$`, '∙': `$\cdot$`, '∘': `$\circ$`, '○': `$\bigcirc$`, '●': `\textbullet{}`, '△': `$\triangle$`, '◇': `$\diamond$`, '★': `$\star$`, '☆': `$\star$`, '′': `$'$`, '″': `$''$`,
	'⟨': `$\langle$`, '⟩': `$\rangle$`, '⌈': `$\lceil$`, '⌉': `$\rceil$`, '⌊': `$\lfloor$`, '⌋': `$\rfloor$`, '‖': `$\parallel$`, '♭': `$\flat$`, '♯': `$\sharp$`, 'ℓ': `$\ell$`, 'ℵ': `$\aleph$`,

	// Greek.
	'α': `$\alpha$`, 'β': `$\beta$`, 'γ': `$\gamma$`, 'δ': `$\delta$`, 'ε': `$\varepsilon$`, 'ζ': `$\zeta$`, 'η': `$\eta$`, 'θ': `$\theta$`, 'ι': `$\iota$`, 'κ': `$\kappa$`, 'λ': `$\lambda$`, 'μ': `$\mu$`,
	'ν': `$\nu$`, 'ξ': `$\xi$`, 'ο': `$o$`, 'π': `$\pi$`, 'ρ': `$\rho$`, 'σ': `$\sigma$`, 'ς': `$\varsigma$`, 'τ': `$\tau$`, 'υ': `$\upsilon$`, 'φ': `$\varphi$`, 'χ': `$\chi$`, 'ψ': `$\psi$`, 'ω': `$\omega$`,
	'ϵ': `$\epsilon$`, 'ϑ': `$\vartheta$`, 'ϕ': `$\phi$`, 'ϱ': `$\varrho$`, 'ϖ': `$\varpi$`,
	'Γ': `$\Gamma$`, 'Δ': `$\Delta$`, 'Θ': `$\Theta$`, 'Λ': `$\Lambda$`, 'Ξ': `$\Xi$`, 'Π': `$\Pi$`, 'Σ': `$\Sigma$`, 'Υ': `$\Upsilon$`, 'Φ': `$\Phi$`, 'Ψ': `$\Psi$`,
	'Α': "A", 'Β': "B", 'Ε': "E", 'Ζ': "Z", 'Η': "H", 'Ι': "I", 'Κ': "K", 'Μ': "M", 'Ν': "N", 'Ο': "O", 'Ρ': "P", 'Τ': "T", 'Χ': "X",
}

// native holds the letters with accents, and the letters of Europe's north and middle,
// that T1 has itself: those of t1enc.dfu (LaTeX 2022), without signs, which have
// commands above, and without the letters it puts together.
const native = "ÀÁÂÃÄÅÆÇÈÉÊËÌÍÎÏÐÑÒÓÔÕÖØÙÚÛÜÝÞßàáâãäåæçèéêëìíîïðñòóôõöøùúûüýþÿ" +
	"ĂăĄąĆćČčĎďĐđĒēĖėĘęĚěĞğĢģĪīĮįİĶķĹĺĻļĽľŁłŃńŅņŇňŊŋŌōŐőŒœŔŕŖŗŘřŚśŞşŠšŢţŤťŪūŮůŰűŲųŸŹźŻżŽžȘșȚț"

// accents gives the command that puts a combining mark on a letter.
var accents = map[rune]string{
	'\u0300': "`", '\u0301': "'", '\u0302': "^", '\u0303': "~", '\u0308': `"`, '\u0304': "=", '\u0307': ".", '\u0306': "u", '\u030c': "v", '\u030b': "H",
	'\u030a': "r", '\u0327': "c", '\u0323': "d", '\u0331': "b", '\u0328': "k",
}

// figures gives the plain form of figures and letters above and below the line.
var figures = func() map[rune]struct {
	plain rune
	below bool
} {
	m := map[rune]struct {
		plain rune
		below bool
	}{'¹': {plain: '1'}, '²': {plain: '2'}, '³': {plain: '3'}}
	for _, r := range "0123456789+\u2212=()abcdefghijklmnoprstuvwxyz" {
		if up, n := utf8.DecodeRuneInString(doc.Raised(string(r))); n == len(doc.Raised(string(r))) && up != r {
			m[up] = struct {
				plain rune
				below bool
			}{plain: r}
		}
		if down, n := utf8.DecodeRuneInString(doc.Lowered(string(r))); n == len(doc.Lowered(string(r))) && down != r {
			m[down] = struct {
				plain rune
				below bool
			}{plain: r, below: true}
		}
	}
	return m
}()

const (
	longWord = 40 // letters; a longer word may be broken
	piece    = 6  // letters between the places where it may
)

// escape writes text so that it means itself, with what no command stands for as its
// code; such runes go to missing. Words of more than long letters may be broken.
func escape(text string, long int, missing func(rune)) string {
	text = norm.NFC.String(doc.Clean(text))
	var b strings.Builder
	word := 0 // letters since the last space
	torn := longWords(text, long)
	put := func(s string) {
		// Neighbours that TeX would set as one sign are kept apart.
		if b.Len() > 0 && s != "" && strings.IndexByte("-'`,!?<>", s[0]) >= 0 {
			if last := b.String()[b.Len()-1]; strings.IndexByte("-'`,!?<>", last) >= 0 {
				b.WriteString("{}")
			}
		}
		b.WriteString(s)
	}
	runes := []rune(text)
	for i := 0; i < len(runes); i++ {
		r := runes[i]
		if unicode.IsSpace(r) {
			word = 0
			if r == '\n' || r == '\t' || r == ' ' {
				torn = torn[1:]
			}
		} else if word++; torn[0] && word > 1 && word%piece == 1 {
			b.WriteString(`\allowbreak{}`)
		}
		if f, ok := figures[r]; ok {
			name := "textsuperscript"
			if f.below {
				name = "textsubscript"
			}
			b.WriteString(`\` + name + "{")
			for ; i < len(runes); i++ {
				next, ok := figures[runes[i]]
				if !ok || next.below != f.below {
					break
				}
				b.WriteString(escape(string(next.plain), long, missing))
			}
			i--
			b.WriteByte('}')
			continue
		}
		if r == '\'' && i > 0 && i+1 < len(runes) && unicode.IsLetter(runes[i-1]) && unicode.IsLetter(runes[i+1]) {
			r = '’' // an apostrophe
		}
		switch s, ok := signs[r]; {
		case ok:
			put(s)
		case r < 0x7f && r >= ' ', strings.ContainsRune(native, r):
			put(string(r))
		default:
			s, ok := accented(r)
			if !ok {
				missing(r)
				s = "{[}" + code(r) + "{]}"
			}
			put(s)
		}
	}
	return b.String()
}

// longWords tells for each word, as spaces part them, whether it is long.
func longWords(text string, long int) []bool {
	var out []bool
	n := 0
	for _, r := range text {
		if r == ' ' || r == '\n' || r == '\t' {
			out = append(out, n > long)
			n = 0
			continue
		}
		n++
	}
	return append(out, n > long)
}

// accented puts a letter together of a plain one and its marks.
func accented(r rune) (string, bool) {
	parts := []rune(norm.NFD.String(string(r)))
	if len(parts) < 2 || !(parts[0] < 0x80 && unicode.IsLetter(parts[0])) {
		return "", false
	}
	out := string(parts[0])
	for i, mark := range parts[1:] {
		command, ok := accents[mark]
		if !ok {
			return "", false
		}
		above := strings.IndexByte("cdbk", command[0]) < 0
		if i == 0 && above && (out == "i" || out == "j") {
			out = `\` + out + "{}" // without its dot
		}
		out = `\` + command + "{" + out + "}"
	}
	return out, true
}
