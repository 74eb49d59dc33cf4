package render

import (
	"bytes"
	"encoding/csv"
	"regexp"
	"strconv"
	"strings"
	"unicode/utf8"

	"penwright/analysis/result"
)

// csvFiles writes the tables of every response in full precision, as RFC 4180 quotes them,
// in UTF-8.
func csvFiles(rs *result.Results) []File {
	var out []File
	for i := range rs.Responses {
		r := &rs.Responses[i]
		add := func(kind string, heading []string, rows [][]string) {
			if len(rows) == 0 {
				return
			}
			var b bytes.Buffer
			w := csv.NewWriter(&b)
			// A bytes.Buffer does not fail.
			_ = w.Write(heading)
			for _, row := range rows {
				for i := range row {
					row[i] = inert(row[i])
				}
				_ = w.Write(row)
			}
			w.Flush()
			out = append(out, File{Path: "tables/" + r.Name + "-" + kind + ".csv", Data: b.Bytes()})
		}
		var rows [][]string
		for _, l := range r.Anova {
			st := ""
			if l.Stratum != nil {
				st = *l.Stratum
			}
			e := ""
			if l.ErrorDF != nil {
				e = full(*l.ErrorDF)
			}
			rows = append(rows, []string{st, l.Source, strconv.Itoa(l.DF), full(l.SS), full(l.MS), full(l.F), full(l.P), e})
		}
		add("anova", []string{"stratum", "source", "df", "ss", "ms", "f", "p", "error_df"}, rows)
		rows = nil
		for _, s := range r.Summary {
			rows = append(rows, []string{levels(s.Levels), strconv.Itoa(s.N), strconv.Itoa(s.Units), full(s.Mean), full(s.SD), full(s.Min), full(s.Max)})
		}
		add("summary", []string{"levels", "n", "units", "mean", "sd", "min", "max"}, rows)
		rows = nil
		for _, m := range r.Means {
			letters := ""
			if m.Letters != nil {
				letters = *m.Letters
			}
			rows = append(rows, []string{m.Term, levels(m.Levels), full(m.Mean), full(m.SE), full(m.SEM), full(m.DF), full(m.Lower), full(m.Upper), strconv.Itoa(m.N), strconv.Itoa(m.Units), letters})
		}
		add("means", []string{"term", "levels", "mean", "se", "sem", "df", "lower", "upper", "n", "units", "letters"}, rows)
		rows = nil
		for _, c := range r.Comparisons {
			rows = append(rows, []string{c.Term, levels(c.At), c.Method, c.A, c.B, full(c.Difference), full(c.SE), full(c.DF), full(c.Statistic), full(c.P), full(c.PAdjusted), full(c.Lower), full(c.Upper)})
		}
		add("comparisons", []string{"term", "at", "method", "a", "b", "difference", "se", "df", "statistic", "p", "p_adjusted", "lower", "upper"}, rows)
		rows = nil
		for _, c := range r.Contrasts {
			rows = append(rows, []string{c.Name, c.Term, full(c.Estimate), full(c.SE), full(c.DF), full(c.SS), full(c.F), full(c.P), full(c.Lower), full(c.Upper)})
		}
		add("contrasts", []string{"name", "term", "estimate", "se", "df", "ss", "f", "p", "lower", "upper"}, rows)
		rows = nil
		for _, x := range r.Residuals {
			rows = append(rows, []string{levels(x.Units), full(x.Observed), full(x.Fitted), full(x.Residual), full(x.Studentized), full(x.Deleted), full(x.Leverage), full(x.Cook)})
		}
		add("residuals", []string{"units", "observed", "fitted", "residual", "studentized", "deleted", "leverage", "cook"}, rows)
	}
	return out
}

// inert writes a cell so that no spreadsheet takes it for a formula: with an apostrophe
// before what begins like one and is no number. (OWASP, CSV Injection, from memory: = + -
// @, tab and carriage return, and the wide forms of the four signs; a line feed is added.)
func inert(cell string) string {
	first, _ := utf8.DecodeRuneInString(cell)
	if !strings.ContainsRune("=+-@\t\r\n\uFF1D\uFF0B\uFF0D\uFF20", first) || cell == "" || number.MatchString(cell) {
		return cell
	}
	return "'" + cell
}

// number is how numbers are written to tables.
var number = regexp.MustCompile(`^[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]+)?$`)

// full is a number in full precision, empty where it is not there.
func full(n result.Number) string {
	if !n.Known() {
		return ""
	}
	return strconv.FormatFloat(float64(n), 'g', -1, 64)
}

// levels writes a cell as factor=level pairs.
func levels(l result.Levels) string {
	var parts []string
	for _, x := range l {
		parts = append(parts, x.Factor+"="+x.Level)
	}
	return strings.Join(parts, "; ")
}
