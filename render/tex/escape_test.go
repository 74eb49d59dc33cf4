package tex

import (
	"regexp"
	"strings"
	"testing"
	"unicode"

	"golang.org/x/text/unicode/norm"

	"penwright/render/doc"
	"penwright/render/doc/sample"
)

// other stands in a text that was read back for what no letter of ASCII stands for.
const other = '\uFFFC'

// ascii are the commands for signs of ASCII (LaTeX2e, encodings T1 and TS1).
var ascii = map[string]string{
	"textbackslash": `\`, "textasciicircum": "^", "textasciitilde": "~", "textless": "<", "textgreater": ">", "textbar": "|",
	"textquotedbl": `"`, "textquotesingle": "'", "textasciigrave": "`", "{": "{", "}": "}", "$": "$", "&": "&", "#": "#", "%": "%", "_": "_",
}

// silent are commands that show nothing.
var silent = map[string]bool{"allowbreak": true, "-": true, "mbox": true}

// harmless are commands that set one sign, or a blank, and take nothing but groups.
var harmless = regexp.MustCompile(`^(text[a-z]+|guil[a-z]+|quote[a-z]+|enspace|quad|phantom|ldots|S|P|[ij]|[cdbkuvHr=.'"^~` + "`" + `]|,)$`)

// reader reads what escape wrote, as TeX would: it fails on any character with a meaning
// and any command that is not expected.
type reader struct {
	t    *testing.T
	in   string
	at   int
	out  strings.Builder
	math bool
}

func (r *reader) fail(why string) { r.t.Fatalf("%s at %d in %q", why, r.at, r.in) }

// group reads to the closing brace, or to the end at depth 0.
func (r *reader) group(depth int) {
	for r.at < len(r.in) {
		rest := r.in[r.at:]
		switch c := rest[0]; {
		case strings.HasPrefix(rest, "{[}U+"):
			end := strings.Index(rest, "{]}")
			if end < 0 {
				r.fail("a code without an end")
			}
			r.at += end + 3
			r.out.WriteRune(other)
		case c == '}':
			if depth == 0 || r.math {
				r.fail("a group is closed that was not opened")
			}
			r.at++
			return
		case c == '{':
			r.at++
			r.group(depth + 1)
		case c == '\\':
			r.command(depth)
		case c == '$':
			r.at++
			if r.math = !r.math; !r.math {
				r.out.WriteRune(other)
			}
		case strings.IndexByte("#%&^_", c) >= 0, c < ' ', c == 0x7f:
			r.fail("a character with a meaning")
		case r.math:
			if c != '-' && c != '\'' && c != 'o' {
				r.fail("text in mathematics")
			}
			r.at++
		case c == '~':
			r.at++
			r.out.WriteRune(other)
		case strings.HasPrefix(rest, "---"):
			r.at += 3
			r.out.WriteRune(other)
		case strings.HasPrefix(rest, "--"):
			r.at += 2
			r.out.WriteRune(other)
		case strings.HasPrefix(rest, "''"), strings.HasPrefix(rest, "``"), strings.HasPrefix(rest, ",,"), strings.HasPrefix(rest, "?`"), strings.HasPrefix(rest, "!`"), c == '<', c == '>', c == '"', c == '|', c == '`':
			r.fail("a sign that TeX takes for another")
		case c < 0x80:
			r.out.WriteByte(c)
			r.at++
		default:
			for i, x := range rest {
				if i == 0 {
					r.out.WriteRune(other)
					r.at += len(string(x))
				}
			}
		}
	}
	if depth > 0 || r.math {
		r.fail("a group without an end")
	}
}

func (r *reader) command(depth int) {
	r.at++
	start := r.at
	for r.at < len(r.in) && (r.in[r.at] >= 'a' && r.in[r.at] <= 'z' || r.in[r.at] >= 'A' && r.in[r.at] <= 'Z') {
		r.at++
	}
	if r.at == start {
		r.at++
	}
	if r.at > len(r.in) {
		r.fail("a backslash at the end")
	}
	name := r.in[start:r.at]
	if r.math {
		if !regexp.MustCompile(`^[A-Za-z]+$`).MatchString(name) || !mathCommands[name] {
			r.fail("command " + name)
		}
		return
	}
	// A command named by letters swallows blanks behind it: something must end it.
	if unicode.IsLetter(rune(name[0])) && !strings.HasPrefix(r.in[r.at:], "{") {
		r.fail("nothing ends command " + name)
	}
	switch s, ok := ascii[name]; {
	case ok:
		r.out.WriteString(s)
	case silent[name]:
	case name == "textsuperscript" || name == "textsubscript":
		r.at++ // the brace
		inner := reader{t: r.t, in: r.in, at: r.at}
		inner.group(depth + 1)
		for range []rune(inner.out.String()) {
			r.out.WriteRune(other)
		}
		r.at = inner.at
	case harmless.MatchString(name):
		r.out.WriteRune(other)
		if len(name) == 1 && name != "S" && name != "P" && name != "," && strings.HasPrefix(r.in[r.at:], "{") {
			r.at++
			inner := reader{t: r.t, in: r.in, at: r.at} // the letter under the accent
			inner.group(depth + 1)
			r.at = inner.at
		} else if name == "phantom" {
			r.at += len("{0}")
		}
	default:
		r.fail("command " + name)
	}
}

// mathCommands are those of the table of signs, all of plain LaTeX.
var mathCommands = func() map[string]bool {
	m := map[string]bool{}
	for _, s := range signs {
		if strings.HasPrefix(s, `$\`) {
			m[strings.Trim(s, `$\`)] = true
		}
	}
	return m
}()

// asRead is what reading should give.
func asRead(text string) string {
	var b strings.Builder
	for _, r := range norm.NFC.String(doc.Clean(text)) {
		s, known := signs[r]
		switch {
		case r == '\n' || r == '\t' || r == '\u2028' || r == '\u2029':
			b.WriteByte(' ')
		case r == '’':
			b.WriteByte('\'')
		case r < 0x80:
			b.WriteRune(r)
		case known && strings.Trim(s, "-ABCDEFGHIJKLMNOPQRSTUVWXYZfil") == "" && s != "--" && s != "---":
			b.WriteString(s) // letters like those of ASCII
		case s == "{}" || s == `\-` || s == `\allowbreak{}`:
		case s == `\mbox{-}`:
			b.WriteByte('-')
		case s == `\textdegree{}F`:
			b.WriteString(string(other) + "F")
		default:
			b.WriteRune(other)
		}
	}
	return b.String()
}

func checkEscape(t *testing.T, text string, long int) {
	t.Helper()
	out := escape(text, long, func(rune) {})
	r := reader{t: t, in: out}
	r.group(0)
	if got, want := r.out.String(), asRead(text); got != want {
		t.Errorf("%q became\n%q, read as\n%q, want\n%q", text, out, got, want)
	}
}

var hostile = []string{
	sample.Hostile, `\input{/etc/passwd}`, `\end{document}`, `}\write18{ls}{`, `$\def\x{}$`, `^^5cinput`, "a%b\nc", `\\[1em]`, "--", "---", "----", "``a''", ",,a''", "?`!`", "<<a>>", "''", "a'b 'c'",
	"−×±≤≥ · 5 °C µ", "kg d⁻¹ x₁₂ ᵃᵇ", "ŝ ễ ı̂ ǰ", "αβγ Ω ΑΒ", "漢字", "العربية", "\u200b\u00ad\u2011\u00a0\u202f\u2009\u2007", "–-—'’’", "[a] *b* ~c~", "\x00\x1b\x7f", "{", "}", `\`, "#1", "&&", "_^", "ﬁﬀﬄ", "𝒜", "\U0001F416",
	strings.Repeat("x", 5000), strings.Repeat("x y ", 50) + strings.Repeat("\\", 60), "½ € £ § © ™ № ‰ † •", "µm μm", "″′", "``", "!`", "\\textbf", "%", "-\u2013-", "a\u0323\u0302",
}

func TestEscape(t *testing.T) {
	for _, s := range hostile {
		checkEscape(t, s, longWord)
		checkEscape(t, s, 3)
	}
	// Every sign of the table, after and before each that it could run into.
	for r := range signs {
		for _, near := range []string{"", "-", "'", "`", ",", "!", "?", "<", "a", " ", "−", "1", "–"} {
			checkEscape(t, near+string(r)+near, longWord)
		}
	}
	for _, r := range native {
		checkEscape(t, string(r), longWord)
	}
}

func TestMissing(t *testing.T) {
	for text, want := range map[string]string{"pen": "", "飼料 a": "飼料", "علف": "علف", "Ŝ ễ": "", "✓": "✓", "жито": "жито"} {
		var got []rune
		escape(text, longWord, func(r rune) { got = append(got, r) })
		if string(got) != want {
			t.Errorf("%q lacks %q, want %q", text, string(got), want)
		}
	}
}

func FuzzEscape(f *testing.F) {
	for _, s := range hostile {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if len(s) > 2000 {
			t.Skip("long")
		}
		checkEscape(t, s, longWord)
		checkEscape(t, s, 8)
	})
}
