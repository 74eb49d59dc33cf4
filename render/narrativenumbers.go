package render

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/protocol/diag"
	"penwright/render/compose"
)

// CodeTyped is the code of a number that was typed by hand beside the name of a response
// and is none of its results.
//
// Example: Daily gain was 910 g/d at 40 g/kg of yeast.
const CodeTyped = "typed-number"

// What the search for typed numbers may cost in one text.
const (
	maxTyped    = 2000 // numbers looked at
	maxWarnings = 50

	longestSentence = 2000 // bytes
)

// quote is a result that prose may quote.
type quote struct {
	kind  quoteKind
	x     float64
	text  string // as it is printed; empty: not worth naming
	what  string
	call  string          // the action that prints it
	cells []result.Levels // the means it is made of
	name  string          // of the contrast or term
	needs *regexp.Regexp  // words of which one must stand in the sentence; nil: none
}

type quoteKind int

const (
	quoteValue quoteKind = iota // in the unit of the response
	quotePercent
	quoteP
	quoteF
	quoteSE
	quoteSED
	quoteSEM
	quoteSD
	quoteLSD
	quoteCV
	quoteN
)

// quotes lists the results of a response that prose may quote.
func (rd *reader) quotesOf(r *result.Response) []quote {
	b, p := rd.b, rd.b.trial.Plan
	var out []quote
	add := func(q quote, x result.Number) {
		if x.Known() {
			q.x = float64(x)
			out = append(out, q)
		}
	}
	unit := func(x result.Number, d int) string { return num.Unit(num.Fixed(float64(x), d), r.Unit) }
	act := func(function string, words ...string) string {
		s := "{{" + function
		for _, w := range append([]string{r.Name}, words...) {
			s += " " + strconv.Quote(w)
		}
		return s + "}}"
	}
	level := func(l result.Levels) string {
		var parts []string
		for _, x := range l {
			parts = append(parts, x.Level)
		}
		return strings.Join(parts, ":")
	}
	whole := subject{response: r}
	add(quote{text: unit(r.GrandMean, whole.decimals()), what: "the grand mean", call: act("mean")}, r.GrandMean)
	add(quote{kind: quoteCV, text: num.Percent(float64(r.CVPercent)) + "\u202f%", what: "the coefficient of variation", call: act("cv")}, r.CVPercent)
	for _, s := range r.Strata {
		add(quote{kind: quoteCV}, s.CVPercent)
	}
	add(quote{kind: quoteN, text: num.Count(r.N), what: "the number of values", call: act("n")}, result.Number(r.N))
	for i := range r.Means {
		m := &r.Means[i]
		s := subject{kind: ofMean, response: r, name: m.Term}
		d, at, cell := s.decimals(), prose.At(p, m.Levels), []result.Levels{m.Levels}
		add(quote{text: unit(m.Mean, d), what: "the mean at " + at, call: act("mean", m.Term, level(m.Levels)), cells: cell}, m.Mean)
		add(quote{needs: limitWords, text: unit(m.Lower, d), what: "the lower limit at " + at, call: act("lower", m.Term, level(m.Levels)), cells: cell}, m.Lower)
		add(quote{needs: limitWords, text: unit(m.Upper, d), what: "the upper limit at " + at, call: act("upper", m.Term, level(m.Levels)), cells: cell}, m.Upper)
		add(quote{kind: quoteSE, text: unit(m.SE, d), what: "the SE at " + at, call: act("se", m.Term, level(m.Levels)), cells: cell}, m.SE)
		add(quote{kind: quoteSEM, text: unit(m.SEM, d), what: "the SEM", call: act("sem", m.Term)}, m.SEM)
		add(quote{kind: quoteN, text: num.Count(m.Units), what: "the number of units at " + at, call: act("units", m.Term, level(m.Levels)), cells: cell}, result.Number(m.Units))
		add(quote{kind: quoteN, cells: cell}, result.Number(m.N))
		const mostPairs = 100 // means of a term
		if len(r.Means) > mostPairs {
			continue
		}
		for j := range r.Means {
			o := &r.Means[j]
			if i == j || o.Term != m.Term {
				continue
			}
			pair := pairOf(r, m.Term, m.Levels, o.Levels)
			x := subject{kind: ofDifference, response: r, name: m.Term}
			d, names, cells := x.decimals(), at+" − "+prose.At(p, o.Levels), []result.Levels{m.Levels, o.Levels}
			add(quote{text: unit(m.Mean-o.Mean, d), what: "the difference " + names, call: act("difference", m.Term, level(m.Levels), level(o.Levels)), cells: cells}, m.Mean-o.Mean)
			add(quote{needs: limitWords, text: unit(pair.Lower, d), what: "the lower limit of " + names, call: act("lower", m.Term, level(m.Levels), level(o.Levels)), cells: cells}, pair.Lower)
			add(quote{needs: limitWords, text: unit(pair.Upper, d), what: "the upper limit of " + names, call: act("upper", m.Term, level(m.Levels), level(o.Levels)), cells: cells}, pair.Upper)
			add(quote{kind: quoteSED, text: unit(pair.SE, d), what: "the SED of " + names, call: act("se", m.Term, level(m.Levels), level(o.Levels)), cells: cells}, pair.SE)
			add(quote{kind: quoteP, text: prose.PValue(float64(pair.PAdjusted)), what: names, call: act("p", m.Term, level(m.Levels), level(o.Levels)), cells: cells}, pair.PAdjusted)
			add(quote{kind: quoteP, cells: cells}, pair.P)
			if o.Mean > 0 {
				change := 100 * (m.Mean - o.Mean) / o.Mean
				add(quote{kind: quotePercent, text: num.Percent(float64(change)) + "\u202f%", what: "the change " + names, call: act("change", m.Term, level(m.Levels), level(o.Levels)), cells: cells}, change)
			}
		}
	}
	for _, s := range r.SED {
		d := num.SEDecimals(float64(s.Mean))
		for _, x := range []result.Number{s.Mean, s.Min, s.Max} {
			add(quote{kind: quoteSED, text: unit(s.Mean, d), what: "the SED", call: act("sed", s.Term)}, x)
		}
		add(quote{kind: quoteLSD, text: unit(s.LSD, num.SEDecimals(float64(s.Max))), what: "the least significant difference", call: act("lsd", s.Term)}, s.LSD)
	}
	var raw []float64
	for _, s := range r.Summary {
		raw = append(raw, float64(s.SD))
	}
	dsd := 0
	for _, x := range raw {
		dsd = max(dsd, num.SEDecimals(x))
	}
	for _, s := range r.Summary {
		cell := []result.Levels{s.Levels}
		var term []string
		for _, x := range s.Levels {
			term = append(term, x.Factor)
		}
		add(quote{kind: quoteSD, text: unit(s.SD, dsd), what: "the SD at " + prose.At(p, s.Levels), call: act("sd", strings.Join(term, ":"), level(s.Levels)), cells: cell}, s.SD)
		add(quote{cells: cell}, s.Mean)
		for _, x := range []result.Number{s.Min, s.Max} {
			add(quote{cells: cell, needs: rd.unitWords}, x)
		}
	}
	for _, c := range r.Components {
		add(quote{kind: quoteSD}, result.Number(math.Sqrt(float64(c.Estimate))))
	}
	for _, x := range r.Residuals {
		add(quote{needs: rd.unitWords}, x.Observed)
	}
	for _, t := range r.Tests {
		add(quote{kind: quoteP, text: prose.PValue(float64(t.P)), what: "P of " + t.Source, call: act("p", t.Source), name: t.Source}, t.P)
		add(quote{kind: quoteF, text: prose.FText(float64(t.DF), float64(t.ErrorDF), float64(t.F)), what: t.Source, call: act("f", t.Source), name: t.Source}, t.F)
	}
	for i := range r.Contrasts {
		c := &r.Contrasts[i]
		s := &subject{kind: ofContrast, response: r, name: c.Name, contrast: c}
		d := s.decimals()
		print := func(x result.Number) string {
			t := num.Fixed(float64(x), d)
			if u := b.contrastUnit(s); u != "" {
				t += "\u202f" + u
			}
			return t
		}
		add(quote{text: print(c.Estimate), what: "the estimate of " + c.Name, call: act("estimate", c.Name), name: c.Name}, c.Estimate)
		add(quote{needs: limitWords, text: print(c.Lower), what: "the lower limit of " + c.Name, call: act("lower", c.Name), name: c.Name}, c.Lower)
		add(quote{needs: limitWords, text: print(c.Upper), what: "the upper limit of " + c.Name, call: act("upper", c.Name), name: c.Name}, c.Upper)
		add(quote{kind: quoteSE, text: print(c.SE), what: "the SE of " + c.Name, call: act("se", c.Name), name: c.Name}, c.SE)
		add(quote{kind: quoteP, text: prose.PValue(float64(c.P)), what: "P of " + c.Name, call: act("p", c.Name), name: c.Name}, c.P)
		add(quote{kind: quoteF, text: prose.FText(float64(c.NumeratorDF), float64(c.DF), float64(c.F)), what: c.Name, call: act("f", c.Name), name: c.Name}, c.F)
	}
	for _, c := range r.Covariates {
		add(quote{kind: quoteP, text: prose.PValue(float64(c.P)), what: "P of " + c.Name, call: act("p", c.Name), name: c.Name}, c.P)
		add(quote{text: num.Fixed(float64(c.Slope), num.SEDecimals(float64(c.SE))), what: "the slope on " + c.Name, call: act("estimate", c.Name), name: c.Name}, c.Slope)
		add(quote{kind: quoteP}, c.EqualSlopesP)
	}
	for _, x := range r.Diagnostics {
		add(quote{kind: quoteP}, x.P)
	}
	// What the plan says of the response may be told again.
	if size := b.rs.SampleSize; size != nil && size.Response == r.Name {
		for _, x := range []result.Number{size.Difference, size.Detectable, size.Margin, size.HalfWidth, size.WishedHalf} {
			add(quote{}, x)
		}
		add(quote{kind: quoteSD}, size.SD)
	}
	if asked := b.trial.Protocol.Response(r.Name); asked != nil && asked.Range != nil {
		add(quote{}, result.Number(asked.Range[0]))
		add(quote{}, result.Number(asked.Range[1]))
	}
	return out
}

// reader finds numbers that were typed by hand in prose about responses.
type reader struct {
	b       *builder
	aliases map[string][]alias // by first word, longest first
	quotes  map[string][]quote
	units   map[string][]string // spellings of the unit of each response
	looked  int

	// unitWords tell that a sentence speaks of single units, not of means.
	unitWords *regexp.Regexp
}

// Words that tell of limits, and of errors and deviations.
var (
	limitWords  = regexp.MustCompile(`(?i)\blimits?\b|\binterval|\bconfiden|\bCI\b|\bbetween\b`)
	spreadWords = regexp.MustCompile(`\bS\.?E\.?[MD]?\b|\bS\.?D\b|\bLSD\b|(?i:\berrors?\b|\bdeviation|\bleast significant)`)
	cvWords     = regexp.MustCompile(`\bCV\b|(?i:\bcoefficient of variation)`)
)

// alias is a name of a response, in words; response is nil for what is none, such as a
// covariate that bears a response's name within its own.
type alias struct {
	words    []string
	response *result.Response
}

func (b *builder) newReader() *reader {
	rd := &reader{b: b, aliases: map[string][]alias{}, quotes: map[string][]quote{}, units: map[string][]string{}}
	words := []string{"smallest", "largest", "lowest", "highest", "heaviest", "lightest", "best", "worst", "minimum", "maximum", "extreme", "outlier", "outlying", "ranged", "single", "individual"}
	for i := range b.trial.Plan.Units {
		name := prose.UnitName(&b.trial.Plan.Units[i])
		words = append(words, regexp.QuoteMeta(name), regexp.QuoteMeta(prose.Plural(name)))
	}
	rd.unitWords = regexp.MustCompile(`(?i)\b(?:` + strings.Join(words, "|") + `)\b`)
	owner := map[string]*result.Response{}
	claim := func(words []string, r *result.Response) {
		key := strings.Join(words, " ")
		if key == "" {
			return
		}
		if old, ok := owner[key]; ok && old != r {
			r = nil
		}
		owner[key] = r
	}
	for i := range b.rs.Responses {
		r := &b.rs.Responses[i]
		if r.Model == nil {
			continue
		}
		claim(wordsOf(r.Name), r)
		label := wordsOf(r.Label)
		claim(label, r)
		// The label without what follows a preposition, and its last words: "backfat depth"
		// and "daily gain" name "Backfat depth at the end" and "Average daily gain".
		for k, w := range label {
			if k > 0 && slices.Contains([]string{"at", "of", "in", "per", "from", "to", "on", "after", "before", "by"}, w) {
				label = label[:k]
				break
			}
		}
		for k := range label {
			if rest := label[k:]; len(rest) > 1 || utf8.RuneCountInString(rest[0]) >= 4 {
				claim(rest, r)
			}
		}
		rd.units[r.Name] = spellings(r.Unit)
	}
	for _, c := range b.trial.Protocol.Covariates {
		owner[strings.Join(wordsOf(c.Name), " ")] = nil
		owner[strings.Join(wordsOf(c.Label), " ")] = nil
	}
	var keys []string
	for key := range owner {
		if key != "" {
			keys = append(keys, key)
		}
	}
	slices.SortFunc(keys, func(a, b string) int {
		if d := strings.Count(b, " ") - strings.Count(a, " "); d != 0 {
			return d
		}
		return strings.Compare(a, b)
	})
	for _, key := range keys {
		words := strings.Split(key, " ")
		rd.aliases[words[0]] = append(rd.aliases[words[0]], alias{words: words, response: owner[key]})
	}
	return rd
}

// wordsOf are the words of a name in lower case.
func wordsOf(s string) []string {
	return strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
}

// spellings are the ways in which a unit may be written.
func spellings(unit string) []string {
	if unit == "" {
		return nil
	}
	out := []string{unit, num.UnitText(unit)}
	over, per, ok := strings.Cut(num.UnitText(unit), "/")
	if !ok || strings.Contains(per, "/") {
		return out
	}
	pers := []string{per}
	switch per {
	case "d":
		pers = append(pers, "day")
	case "wk":
		pers = append(pers, "week")
	case "h":
		pers = append(pers, "hour")
	}
	for _, p := range pers {
		for _, between := range []string{"/", " per ", " a ", " / ", " and "} {
			out = append(out, over+between+p)
		}
		for _, minus := range []string{"⁻¹", "-1", "−1", "^-1"} {
			out = append(out, over+" "+p+minus)
		}
	}
	slices.SortFunc(out, func(a, b string) int { return len(b) - len(a) })
	return out
}

// hidden are the parts of a source that are no prose: code, comments, targets of links.
var hidden = regexp.MustCompile("(?s)```.*?(?:```|$)|<!--.*?(?:-->|$)|`[^`\n]*`|\\]\\([^)\n]*\\)|<[a-z]+:[^>\n]*>|(?m:^\\s*\\|.*$)|(?m:^ {0,3}\\[[^\\]\n]+\\]:.*$)")

// Marks that stand for what was taken out.
const (
	actionMark = '\x01'
	citeMark   = '\x02'
)

// prose returns a source in which all that is no prose is blank, offset by offset.
func proseOf(text string) []byte {
	out := []byte(text)
	blank := func(from, to int, mark byte) {
		for i := from; i < to; i++ {
			if out[i] != '\n' {
				out[i] = ' '
			}
		}
		if mark != 0 && to > from {
			out[from] = mark
		}
	}
	for at := 0; ; {
		i := strings.Index(text[at:], "{{")
		if i < 0 {
			break
		}
		end := strings.Index(text[at+i:], "}}")
		if end < 0 {
			blank(at+i, len(text), actionMark)
			break
		}
		blank(at+i, at+i+end+2, actionMark)
		at += i + end + 2
	}
	for _, m := range hidden.FindAllIndex(out, -1) {
		mark := byte(0)
		if out[m[0]] == ']' || out[m[0]] == '<' && !strings.HasPrefix(string(out[m[0]:m[1]]), "<!--") {
			mark = citeMark // a link is a source
		}
		blank(m[0], m[1], mark)
	}
	for _, m := range footnoteCall.FindAllIndex(out, -1) {
		blank(m[0], m[1], citeMark)
	}
	return out
}

var footnoteCall = regexp.MustCompile(`\[\^[^\]\n]+\]`)

// elsewhere finds words that say a number is from another place than these results:
// literature, plans, expectations, rules.
var elsewhere = regexp.MustCompile(`(?i)\x02|\bet al\b|\b(?:19|20)\d\d[a-z]?[);]|\bliterature\b|\bpublished\b|\breported (?:by|in|from|for|elsewhere)\b|\bothers\b|\bearlier\b|\bprevious|\belsewhere\b|` +
	`\bexpect|\bassum|\bplanned\b|\bwould\b|\bcould\b|\bmight\b|\bshould\b|\bhypothes|\btarget|\bstandard (?:value|curve|requirement)|\brecommend|\brequire|\bdetect|\baccura|\bnearest\b|\bresolution\b|` +
	`\bregarded\b|\bconsidered\b|\bdeclared\b|\btaken as\b|\baimed?\b|\bsuppose|\bfor example\b|\bhistor|\busual|\btypical|\bcommon`)

// sentenceEnd is where a sentence may end.
var sentenceEnd = regexp.MustCompile(`[.!?:;]["’”)]?\s+|\n[ \t]*\n|\n[ \t]*(?:[-*+#>]|\d+[.)])[ \t]`)

var abbreviation = regexp.MustCompile(`(?i)(?:\b(?:e\.g|i\.e|vs?|cf|ca|no|nos|fig|figs|eq|approx|resp|al|dr|sp|spp)|\b[A-Z])\.$`)

// typed warns of numbers in a source that were typed by hand beside the name of a
// response and are none of its results.
func (rd *reader) typed(source compose.Source) diag.List {
	var list diag.List
	text := proseOf(source.Text)
	start := 0
	sentence := func(end int) {
		// What is longer than any sentence is not read: its numbers belong to nothing.
		if start < end && end-start <= longestSentence && len(list) < maxWarnings && rd.looked <= maxTyped {
			list = append(list, rd.sentence(source, text, start, end)...)
		}
		start = end
	}
	for _, m := range sentenceEnd.FindAllIndex(text, -1) {
		if m[0] < start || text[m[0]] == '.' && abbreviation.Match(text[max(start, m[0]-8):m[0]+1]) {
			continue
		}
		if c := text[m[0]]; c == ':' || c == ';' {
			continue // one thought
		}
		sentence(m[1])
	}
	sentence(len(text))
	return list
}

// mention is a name of a response in a sentence.
type mention struct {
	at, end  int
	response *result.Response
}

// mentions finds the names of responses in a stretch of text.
func (rd *reader) mentions(text []byte, from, to int) []mention {
	type word struct {
		at, end int
		text    string
	}
	var ws []word
	for i := from; i < to; {
		r, size := utf8.DecodeRune(text[i:to])
		if !unicode.IsLetter(r) && !unicode.IsDigit(r) {
			i += size
			continue
		}
		w := word{at: i}
		for i < to {
			r, size := utf8.DecodeRune(text[i:to])
			if !unicode.IsLetter(r) && !unicode.IsDigit(r) {
				break
			}
			i += size
		}
		w.end, w.text = i, strings.ToLower(string(text[w.at:i]))
		ws = append(ws, w)
	}
	var out []mention
	for k := 0; k < len(ws); k++ {
		singular := strings.TrimSuffix(ws[k].text, "s")
		for _, a := range slices.Concat(rd.aliases[ws[k].text], rd.aliases[singular]) {
			if k+len(a.words) > len(ws) {
				continue
			}
			same := true
			for i, w := range a.words {
				same = same && (ws[k+i].text == w || i == len(a.words)-1 && ws[k+i].text == w+"s")
			}
			if same {
				if a.response != nil {
					out = append(out, mention{at: ws[k].at, end: ws[k+len(a.words)-1].end, response: a.response})
				}
				k += len(a.words) - 1
				break
			}
		}
	}
	return out
}

// figure is a number in prose.
type typedNumber struct {
	at, end  int // of the digits, with the sign
	x        float64
	decimals int
	zeros    int    // at the end of a whole number
	after    int    // where what follows begins, without blanks
	unit     string // spelling of a unit that follows, or "%"
	unitEnd  int
	group    int // numbers of one list, as in "863, 867 and 900 g/d", share it
	place    int // in its list, from 0
	of       int // length of its list
}

// sentence looks at one sentence.
func (rd *reader) sentence(source compose.Source, text []byte, from, to int) diag.List {
	var list diag.List
	if !slices.ContainsFunc(text[from:to], func(c byte) bool { return '0' <= c && c <= '9' }) {
		return nil
	}
	said := rd.mentions(text, from, to)
	if len(said) == 0 || elsewhere.Match(text[from:to]) {
		return nil
	}
	responses := map[string]*result.Response{}
	var units []string
	for _, m := range said {
		if responses[m.response.Name] == nil {
			responses[m.response.Name] = m.response
			units = append(units, rd.units[m.response.Name]...)
		}
	}
	numbers := rd.numbers(text, from, to, units)
	levels := rd.levels(text, from, to, numbers)
	for i := range numbers {
		n := &numbers[i]
		if rd.looked++; rd.looked > maxTyped {
			return list
		}
		kind, relation, ok := rd.kind(text, from, to, n, said, responses)
		if !ok {
			continue
		}
		about := rd.about(n, kind, said, responses)
		if len(about) == 0 {
			continue
		}
		if d, bad := rd.judge(text, from, to, n, kind, relation, about, numbers, levels); bad {
			d.Pos = placeIn(source, n.at)
			list.Add(d)
		}
	}
	return list
}

// numbers finds the numbers of a stretch with their units. Those of a list, as in
// "863, 867 and 900 g/d", share the unit of the last.
func (rd *reader) numbers(text []byte, from, to int, units []string) []typedNumber {
	var out []typedNumber
	digit := func(i int) bool { return i < to && '0' <= text[i] && text[i] <= '9' }
	for i := from; i < to; {
		if !digit(i) {
			_, size := utf8.DecodeRune(text[i:to])
			i += size
			continue
		}
		n := typedNumber{at: i}
		before, _ := utf8.DecodeLastRune(text[from:i])
		var clean strings.Builder
		for digit(i) {
			clean.WriteByte(text[i])
			i++
		}
		bad := i-n.at > 15 || unicode.IsLetter(before) || before == '_' || before == '.' || before == '/' || before == ':' || before == ',' || before == '#'
		// Groups of three digits.
		for !bad && i-n.at <= 3+12 {
			r, size := utf8.DecodeRune(text[i:to])
			if (r == '\u2009' || r == '\u202f' || r == '\u00a0' || r == ',') && digit(i+size) && digit(i+size+1) && digit(i+size+2) && !digit(i+size+3) && clean.Len() <= 12 {
				clean.Write(text[i+size : i+size+3])
				i += size + 3
				continue
			}
			break
		}
		if i < to && text[i] == ',' && digit(i+1) { // a decimal comma, or something else
			bad = true
			for i++; digit(i); i++ {
			}
		}
		if i < to && text[i] == '.' && digit(i+1) {
			clean.WriteByte('.')
			for i++; digit(i); i++ {
				clean.WriteByte(text[i])
				n.decimals++
			}
			for i < to && text[i] == '.' && digit(i+1) { // a date or a version
				bad = true
				for i++; digit(i); i++ {
				}
			}
		}
		n.end = i
		// A sign stands before, after a blank or a bracket; a stroke between digits or
		// letters is none.
		minus := false
		if before == '-' || before == '−' || before == '–' {
			at := n.at - utf8.RuneLen(before)
			earlier, _ := utf8.DecodeLastRune(text[from:at])
			switch {
			case at == from || unicode.IsSpace(earlier) || earlier == '(' || earlier == '=':
				minus = before != '–'
				if minus {
					n.at = at
				}
			case before == '–' && unicode.IsDigit(earlier):
			case unicode.IsDigit(earlier) && len(out) > 0 && out[len(out)-1].end == at:
				if out[len(out)-1].decimals == 0 && n.decimals == 0 && before == '-' && out[len(out)-1].end-out[len(out)-1].at == 4 {
					bad = true // part of a date
				}
			default:
				bad = true
			}
		}
		x, err := strconv.ParseFloat(clean.String(), 64)
		if err != nil || bad {
			// What is left of it is no number either.
			for i < to && (digit(i) || text[i] == '-' || text[i] == '/' || text[i] == ':') {
				i++
			}
			continue
		}
		n.x = x
		if minus {
			n.x = -x
		}
		if n.decimals == 0 {
			n.zeros = len(clean.String()) - len(strings.TrimRight(clean.String(), "0"))
		}
		n.after = i
		for n.after < to {
			r, size := utf8.DecodeRune(text[n.after:to])
			if !unicode.IsSpace(r) && r != '\u2009' && r != '\u202f' {
				break
			}
			n.after += size
		}
		for _, u := range append(units, "%", "per cent", "percent") {
			if u == "" || !strings.HasPrefix(string(text[n.after:min(to, n.after+len(u))]), u) {
				continue
			}
			next, _ := utf8.DecodeRune(text[n.after+len(u) : to])
			if unicode.IsLetter(next) && u != "%" || next == '/' || next == '²' || next == '³' || next == '⁻' {
				continue
			}
			n.unit, n.unitEnd = u, n.after+len(u)
			if u == "per cent" || u == "percent" {
				n.unit = "%"
			}
			break
		}
		if n.unit == "" {
			if r, _ := utf8.DecodeRune(text[i:to]); unicode.IsLetter(r) || r == '/' || r == ':' || r == '\'' {
				continue
			}
		}
		out = append(out, n)
	}
	for i := len(out) - 2; i >= 0; i-- {
		if out[i].unit == "" && listed(text[out[i].end:out[i+1].at]) {
			out[i].unit, out[i].unitEnd = out[i+1].unit, out[i].end
			if out[i].unit == "" {
				out[i].after = out[i+1].after
			}
		}
	}
	for i := 0; i < len(out); {
		j := i + 1
		for j < len(out) && listed(text[out[j-1].end:out[j].at]) {
			j++
		}
		for k := i; k < j; k++ {
			out[k].group, out[k].place, out[k].of = i, k-i, j-i
		}
		i = j
	}
	return out
}

// listed tells whether what stands between two numbers makes a list or a range of them.
func listed(between []byte) bool {
	return slices.Contains([]string{"", "and", "to", "or", "–", "-", "against", "versus", "v."}, strings.Trim(string(between), " \n\t,\u00a0\u2009\u202f"))
}

// levelMention is a level of a factor in a sentence.
type levelMention struct {
	at, end   int
	level     result.FactorLevel
	place, of int // in its list
}

// levels finds the levels of factors that a stretch names: numbers with the unit of a
// graded factor, and words.
func (rd *reader) levels(text []byte, from, to int, numbers []typedNumber) []levelMention {
	var out []levelMention
	lower := strings.ToLower(string(text[from:to]))
	for i := range rd.b.trial.Plan.Factors {
		f := &rd.b.trial.Plan.Factors[i]
		unit := ""
		if f.Protocol != nil {
			unit = f.Protocol.Unit
		}
		for k, l := range f.Levels {
			if f.Values == nil {
				word := strings.ToLower(l)
				if utf8.RuneCountInString(word) < 3 || len(lower) != to-from {
					continue
				}
				for at := 0; ; {
					j := strings.Index(lower[at:], word)
					if j < 0 {
						break
					}
					j += at
					b, _ := utf8.DecodeLastRuneInString(lower[:j])
					a, _ := utf8.DecodeRuneInString(lower[j+len(word):])
					if !unicode.IsLetter(b) && !unicode.IsLetter(a) {
						out = append(out, levelMention{at: from + j, end: from + j + len(word), level: result.FactorLevel{Factor: f.Name, Level: l}, of: 1})
					}
					at = j + len(word)
				}
				continue
			}
			if unit == "" {
				continue
			}
			for j := range numbers {
				n := &numbers[j]
				if n.x == f.Values[k] && n.unit == "" && rd.followedByLevelUnit(text, to, numbers, j, unit) {
					out = append(out, levelMention{at: n.at, end: n.end, level: result.FactorLevel{Factor: f.Name, Level: l}, place: n.place, of: n.of})
				}
			}
		}
	}
	slices.SortStableFunc(out, func(a, b levelMention) int { return a.at - b.at })
	return out
}

// followedByLevelUnit tells whether a number, or the last of its list, has the unit of a
// factor.
func (rd *reader) followedByLevelUnit(text []byte, to int, numbers []typedNumber, j int, unit string) bool {
	last := j + numbers[j].of - 1 - numbers[j].place
	for _, u := range []string{unit, num.UnitText(unit)} {
		if strings.HasPrefix(string(text[numbers[last].after:to]), u) {
			return true
		}
	}
	return false
}

var (
	beforeP    = regexp.MustCompile(`\b[Pp]\*{0,2}\s*([=<>≤≥])\s*$`)
	beforeF    = regexp.MustCompile(`\bF\*{0,2}\s*(?:\([^)]*\))?\s*=\s*$`)
	beforeKind = regexp.MustCompile(`\b(SEM|SED|SE|SD|LSD|CV|s\.e\.m\.|s\.e\.d\.|s\.e\.|s\.d\.|n|standard error|standard deviation|coefficient of variation)\s*(?:=|:|of|was|is|,)?\s*$`)
	beforeName = regexp.MustCompile(`(?i)\b(?:tables?|figures?|figs?\.|sections?|chapters?|pages?|days?|weeks?|months?|periods?|blocks?|pens?|rows?|columns?|plots?|squares?|no\.?|number|equation|eq\.|item|batch|phase|age|version|level|df|r²?|t|χ²|january|february|march|april|may|june|july|august|september|october|november|december|in|since|until|from)\s*(?:=|of)?\s*$`)
	beforeMore = regexp.MustCompile(`(?i)(?:\b(?:at least|at most|more than|less than|over|under|below|above|up to|beyond|exceed(?:s|ed|ing)?|not|fewer than|no more than|no less than|within|±)|[<>≤≥±])\s*$`)
	beforeAway = regexp.MustCompile(`(?i)(?:\b(?:about|around|nearly|almost|roughly|approximately|some|close to|ca\.?)|[~≈])\s*$`)
	// A bare number quotes a result where it ends what was said of the response.
	beforeBare = regexp.MustCompile(`(?i)\b(?:was|were|of|averaged|reached|be|is|are|to|by|and|at|from|than|gave|had|with|\()\s*$`)
	afterBare  = regexp.MustCompile(`(?i)^(?:[.,;:)!?]|$|and\b|or\b|at\b|in\b|on\b|with\b|without\b|for\b|from\b|to\b|against\b|but\b|when\b|while\b|than\b|under\b|\x01)`)
	afterLevel = regexp.MustCompile(`(?i)^(?:\)|,)?\s*(?:at|with|on|for|in|under|by|of)\s+(?:the\s+)?(?:level\s+|diet\s+)?$`)
	confidence = regexp.MustCompile(`(?i)^\s*(?:-)?\s*(?:confidence|limits?|intervals?|probability|level|CI|significance)\b`)
	alphaLevel = regexp.MustCompile(`(?i)\blevel of\s*$`)
	changing   = regexp.MustCompile(`(?i)\b(?:rose|rise|risen|increas|improv|grew|fell|fallen|declin|decreas|drop|reduc|lower|higher|more|less|greater|faster|slower|chang|differ|gain(?:ed|s)?\b.*\bby)`)
	restricted = regexp.MustCompile(`(?i)\b(linear|quadratic|cubic|lack of fit|interaction)\b`)
)

// kind says what a number seems to quote; ok is false where it seems to quote nothing.
func (rd *reader) kind(text []byte, from, to int, n *typedNumber, said []mention, responses map[string]*result.Response) (kind quoteKind, relation string, ok bool) {
	before := text[max(from, n.at-60):n.at]
	after := text[n.after:to]
	if i := slices.Index(before, byte(actionMark)); i >= 0 && len(strings.TrimSpace(string(before[i+1:]))) == 0 {
		return 0, "", false // it goes on what an action prints
	}
	if m := beforeP.FindSubmatch(before); m != nil {
		return quoteP, string(m[1]), true
	}
	if open := strings.LastIndex(string(before), "F("); open >= 0 && !strings.Contains(string(before[open:]), ")") {
		return 0, "", false // degrees of freedom
	}
	if beforeF.Match(before) {
		return quoteF, "=", true
	}
	if m := beforeKind.FindSubmatch(before); m != nil {
		switch strings.ToUpper(strings.ReplaceAll(string(m[1]), ".", "")) {
		case "SEM":
			return quoteSEM, "=", true
		case "SED":
			return quoteSED, "=", true
		case "SE", "STANDARD ERROR":
			return quoteSE, "=", true
		case "SD", "STANDARD DEVIATION":
			return quoteSD, "=", true
		case "LSD":
			return quoteLSD, "=", true
		case "CV", "COEFFICIENT OF VARIATION":
			return quoteCV, "=", true
		case "N":
			return quoteN, "=", true
		}
	}
	if beforeMore.Match(before) {
		return 0, "", false
	}
	isUnit := false
	for name := range responses {
		isUnit = isUnit || slices.Contains(rd.units[name], n.unit)
	}
	switch {
	case n.unit != "" && isUnit:
		return quoteValue, "=", true
	case n.unit == "%":
		if cvWords.Match(text[from:n.at]) {
			return quoteCV, "=", true
		}
		if confidence.Match(text[n.unitEnd:to]) || alphaLevel.Match(before) || !changing.Match(text[from:to]) || rd.isLevel(n.x, "%") {
			return 0, "", false
		}
		// A share of something, as in "6 % yeast", is none of a change.
		return quotePercent, "=", beforeBareChange(before, text[n.unitEnd:to])
	case n.unit != "":
		return 0, "", false
	}
	if beforeName.Match(before) || !beforeBare.Match(before) || !afterBare.Match(after) || rd.isLevel(n.x, "") {
		return 0, "", false
	}
	return quoteValue, "=", true
}

var (
	byPercent   = regexp.MustCompile(`(?i)\b(?:by|of|was|were|to|and|another|further|about|around|nearly|almost|roughly|approximately|\()\s*$`)
	morePercent = regexp.MustCompile(`(?i)^\s*(?:[.,;)]|$|higher|lower|more|less|greater|faster|slower|above|below|at\b|with\b|when\b|between\b|from\b|on\b|over\b|than\b|and\b|in\b)`)
)

func beforeBareChange(before, after []byte) bool {
	return byPercent.Match(before) && morePercent.Match(after) || regexp.MustCompile(`(?i)^\s*(?:higher|lower|more|less|greater|faster|slower)\b`).Match(after)
}

// isLevel tells whether a number is a level of a factor with such a unit; an empty unit
// stands for any.
func (rd *reader) isLevel(x float64, unit string) bool {
	for i := range rd.b.trial.Plan.Factors {
		f := &rd.b.trial.Plan.Factors[i]
		if unit != "" && (f.Protocol == nil || f.Protocol.Unit != unit) {
			continue
		}
		for k := range f.Levels {
			if f.Values != nil && f.Values[k] == x {
				return true
			}
			if y, err := strconv.ParseFloat(f.Levels[k], 64); err == nil && y == x {
				return true
			}
		}
	}
	return false
}

// about lists the responses that a number may be about: those with its unit; a number
// without one is about the response named last before it.
func (rd *reader) about(n *typedNumber, kind quoteKind, said []mention, responses map[string]*result.Response) []*result.Response {
	last := said[0].response
	for _, m := range said {
		if m.at < n.at {
			last = m.response
		}
	}
	if kind != quoteValue || n.unit == "" {
		if kind == quoteValue && said[0].at > n.at {
			return nil
		}
		if kind == quoteValue || len(responses) == 1 {
			return []*result.Response{last}
		}
	}
	var out []*result.Response
	for _, m := range said {
		if (n.unit == "" || kind != quoteValue || slices.Contains(rd.units[m.response.Name], n.unit)) && !slices.Contains(out, m.response) {
			out = append(out, m.response)
		}
	}
	return out
}

// judge holds a number against the results of responses. bad is true when it is none of
// them; the diagnostic then names the nearest.
func (rd *reader) judge(text []byte, from, to int, n *typedNumber, kind quoteKind, relation string, about []*result.Response, numbers []typedNumber, levels []levelMention) (d diag.Diagnostic, bad bool) {
	tolerance := 0.5 * math.Pow(10, -float64(n.decimals))
	if n.decimals == 0 && n.zeros > 0 {
		digits := len(strconv.FormatFloat(math.Abs(n.x), 'f', 0, 64))
		tolerance *= math.Pow(10, float64(min(n.zeros, max(digits-2, 0))))
	}
	if beforeAway.Match(text[max(from, n.at-30):n.at]) {
		tolerance = math.Max(tolerance, 0.05*math.Abs(n.x))
	}
	tolerance *= 1 + 1e-9
	named := rd.namedBy(text, n, numbers, levels)
	words := restricted.FindAllSubmatch(text[from:min(len(text), n.end+80)], -1)
	var nearest *quote
	var of *result.Response
	distance := math.Inf(1)
	kinds := []quoteKind{kind}
	switch kind {
	case quoteValue:
		if spreadWords.Match(text[from:to]) {
			kinds = append(kinds, quoteSE, quoteSED, quoteSEM, quoteSD, quoteLSD)
		}
	case quoteSE:
		kinds = append(kinds, quoteSEM, quoteSED)
	case quoteSEM:
		kinds = append(kinds, quoteSE)
	case quoteSED:
		kinds = append(kinds, quoteSE)
	case quotePercent:
		kinds = append(kinds, quoteCV)
	}
	for _, r := range about {
		if rd.quotes[r.Name] == nil {
			rd.quotes[r.Name] = rd.quotesOf(r)
		}
		for i := range rd.quotes[r.Name] {
			q := &rd.quotes[r.Name][i]
			if q.needs != nil && !q.needs.Match(text[from:to]) {
				continue
			}
			if !slices.Contains(kinds, q.kind) || named != nil && len(q.cells) > 0 && !slices.ContainsFunc(q.cells, func(c result.Levels) bool { return slices.Contains(c, *named) }) {
				continue
			}
			if kind == quoteP && len(words) > 0 && q.name != "" && !matches(q.name, words) {
				continue
			}
			off := math.Abs(math.Abs(q.x) - math.Abs(n.x))
			holds := off <= tolerance
			switch relation {
			case "<", "≤":
				holds = q.x < n.x || relation == "≤" && q.x == n.x
				off = math.Max(0, q.x-n.x)
			case ">", "≥":
				holds = q.x > n.x || relation == "≥" && q.x == n.x
				off = math.Max(0, n.x-q.x)
			}
			if holds {
				return d, false
			}
			// What the sentence names comes before what is merely near.
			if named != nil && len(q.cells) == 1 {
				off /= 4
			}
			if q.kind == kind && q.text != "" && off < distance {
				nearest, of, distance = q, r, off
			}
		}
	}
	if nearest == nil {
		return d, false // there is nothing that it could quote
	}
	written := strings.Join(strings.Fields(string(text[n.at:max(n.end, n.unitEnd)])), " ")
	if kind == quoteP {
		written = "P " + relation + " " + written
	}
	r := *of
	r.Unit = ""
	d = diag.Diagnostic{Severity: diag.Warning, Code: CodeTyped,
		Message: fmt.Sprintf("%q is typed beside %s and is none of its results; nearest is %s: %s", written, prose.ResponseText(&r), nearest.what, nearest.text),
		Hint:    "write " + nearest.call + ", or say in the sentence where the number comes from"}
	return d, true
}

func matches(name string, words [][][]byte) bool {
	for _, w := range words {
		word := strings.ToLower(string(w[1]))
		if word == "interaction" && strings.Contains(name, ":") || strings.Contains(name, word) {
			return true
		}
	}
	return false
}

// namedBy is the level that a number is said to be at: the one right behind it, or the
// only one of its sentence.
func (rd *reader) namedBy(text []byte, n *typedNumber, numbers []typedNumber, levels []levelMention) *result.FactorLevel {
	factors := map[string]map[string]bool{}
	for i := range levels {
		l := &levels[i]
		if factors[l.level.Factor] == nil {
			factors[l.level.Factor] = map[string]bool{}
		}
		factors[l.level.Factor][l.level.Level] = true
	}
	// The list of levels behind the list of numbers goes with it, one by one.
	last := n
	for i := range numbers {
		if numbers[i].group == n.group {
			last = &numbers[i]
		}
	}
	end := max(last.end, last.unitEnd)
	for i := range levels {
		l := &levels[i]
		if l.place != 0 || l.at < end || !afterLevel.Match(text[end:l.at]) {
			continue
		}
		if l.of != n.of {
			return nil
		}
		for j := range levels {
			if levels[j].level.Factor == l.level.Factor && levels[j].at >= l.at && levels[j].place == n.place {
				return &levels[j].level
			}
		}
	}
	// One level is that of the sentence, if it tells of one number or one list.
	for i := range numbers {
		if numbers[i].unit == n.unit && numbers[i].group != n.group {
			return nil
		}
	}
	if len(factors) == 1 {
		for _, ls := range factors {
			if len(ls) == 1 {
				return &levels[0].level
			}
		}
	}
	return nil
}

// placeIn is the place of an offset in a source, as editors count.
func placeIn(source compose.Source, offset int) diag.Pos {
	line := 1 + strings.Count(source.Text[:offset], "\n")
	col := offset - (strings.LastIndexByte(source.Text[:offset], '\n') + 1) + 1
	return diag.Pos{File: source.Name, Line: line, Col: col}
}
