package main

import (
	"fmt"
	"regexp"
	"slices"
	"strings"
)

// text is a starter that is being adapted, line by line, so that its comments stay. It
// relies on what the starters keep to and their test sees to: a key and its value on
// one line, or a list that goes on, and no comment on a line that opens a list.
type text struct{ lines []string }

// block is a table of a starter: its head and the lines up to the next one.
type block struct{ from, to int }

var (
	head   = regexp.MustCompile(`^\[\[?([a-z_.]+)\]\]?`)
	assign = regexp.MustCompile(`^([a-z_]+)(\s*=\s*)(.*)$`)
)

const ruled = "# ---- "

// blocks lists the tables of a name in their order. A comment above the next table is
// no part of one.
func (t *text) blocks(name string) []block {
	var out []block
	open := false
	for i, l := range t.lines {
		if m := head.FindStringSubmatch(l); m != nil || strings.HasPrefix(l, ruled) {
			if open {
				out[len(out)-1].to = i
			}
			if open = m != nil && m[1] == name; open {
				out = append(out, block{from: i, to: len(t.lines)})
			}
		}
	}
	for k := range out {
		b := &out[k]
		for b.to > b.from && (t.lines[b.to-1] == "" || strings.HasPrefix(t.lines[b.to-1], "#")) {
			b.to--
		}
	}
	return out
}

// section is what stands under a ruled heading.
func (t *text) section(title string) block {
	from := slices.IndexFunc(t.lines, func(l string) bool { return strings.HasPrefix(l, ruled+title) })
	if from < 0 {
		panic("main: a starter lacks a section")
	}
	to := from + 1
	for to < len(t.lines) && !strings.HasPrefix(t.lines[to], ruled) {
		to++
	}
	return block{from: from, to: to}
}

// find gives the lines of a key of a table, nothing where it does not stand.
func (t *text) find(b block, key string) (from, to int) {
	for i := b.from + 1; i < b.to; i++ {
		if m := assign.FindStringSubmatch(t.lines[i]); m != nil && m[1] == key {
			to := i + 1
			if strings.HasPrefix(m[3], "[") {
				for depth(t.lines[i:to]) > 0 && to < b.to {
					to++
				}
			}
			return i, to
		}
	}
	return -1, -1
}

// depth counts the brackets that are open at the end of lines, outside quotes.
func depth(lines []string) int {
	n, quoted := 0, false
	for _, l := range lines {
		for i, r := range l {
			switch {
			case r == '"' && (i == 0 || l[i-1] != '\\'):
				quoted = !quoted
			case quoted:
			case r == '[':
				n++
			case r == ']':
				n--
			}
		}
	}
	return n
}

// get is the value of a key as it is written, without the comment behind it.
func (t *text) get(b block, key string) string {
	from, to := t.find(b, key)
	if from < 0 {
		return ""
	}
	var out []string
	for i := from; i < to; i++ {
		l := t.lines[i]
		if i == from {
			l = assign.FindStringSubmatch(l)[3]
		}
		code, _ := remark(l)
		out = append(out, strings.TrimSpace(code))
	}
	return strings.Join(out, " ")
}

// remark parts a line from the comment behind it.
func remark(l string) (code, comment string) {
	quoted := false
	for i := range len(l) {
		switch {
		case l[i] == '"' && (i == 0 || l[i-1] != '\\'):
			quoted = !quoted
		case l[i] == '#' && !quoted:
			return l[:i], l[i:]
		}
	}
	return l, ""
}

// set gives a key another value, keeping the comment behind it; a key that does not
// stand yet follows the name.
func (t *text) set(b *block, key, value string) {
	from, to := t.find(*b, key)
	if from < 0 {
		_, at := t.find(*b, "name")
		t.lines = slices.Insert(t.lines, max(at, b.from+1), key+" = "+value)
		b.to++
		return
	}
	m := assign.FindStringSubmatch(t.lines[from])
	line := m[1] + m[2] + value
	if _, comment := remark(m[3]); comment != "" {
		line = fmt.Sprintf("%-33s %s", line, comment)
	}
	t.lines[from] = line
	t.lines = slices.Delete(t.lines, from+1, to)
	b.to -= to - from - 1
}

// mute makes comments of keys of a table, of all of it without keys.
func (t *text) mute(b block, keys ...string) {
	if len(keys) == 0 {
		t.muteLines(b.from, b.to)
	}
	for _, k := range keys {
		if from, to := t.find(b, k); from >= 0 {
			t.muteLines(from, to)
		}
	}
}

func (t *text) muteLines(from, to int) {
	for i := from; i < to; i++ {
		if l := t.lines[i]; l != "" && !strings.HasPrefix(l, "#") {
			t.lines[i] = "# " + l
		}
	}
}

// replace puts other lines in the place of some.
func (t *text) replace(b block, lines []string) {
	t.lines = slices.Concat(t.lines[:b.from], lines, t.lines[b.to:])
}

// rename gives units, factors, responses their new names wherever others refer to them.
func (t *text) rename(names map[string]string) {
	word := regexp.MustCompile(`"[a-z0-9_:]+"`)
	inner := regexp.MustCompile(`([{,]\s*)([a-z][a-z0-9_]*)(\s*=)`)
	for i, l := range t.lines {
		m := assign.FindStringSubmatch(l)
		if m == nil {
			continue
		}
		code, comment := remark(m[3])
		switch m[1] {
		case "name", "within", "crosses", "receives", "carries", "factor", "along", "on", "term", "response", "covariates":
			code = word.ReplaceAllStringFunc(code, func(q string) string {
				parts := strings.Split(strings.Trim(q, `"`), ":")
				for k, p := range parts {
					if n, ok := names[p]; ok {
						parts[k] = n
					}
				}
				return `"` + strings.Join(parts, ":") + `"`
			})
		case "sd", "levels":
			code = inner.ReplaceAllStringFunc(code, func(s string) string {
				x := inner.FindStringSubmatch(s)
				if n, ok := names[x[2]]; ok {
					return x[1] + n + x[3]
				}
				return s
			})
		default:
			continue
		}
		line := m[1] + m[2] + strings.TrimRight(code, " ")
		if comment != "" {
			line = fmt.Sprintf("%-33s %s", line, comment)
		}
		t.lines[i] = line
	}
}

// quoted is a text as TOML writes it.
func quoted(s string) string {
	r := strings.NewReplacer(`\`, `\\`, `"`, `\"`)
	return `"` + r.Replace(s) + `"`
}

// words lists the texts of a value such as ["a", "b"] or [1, 2], and tells whether they
// are numbers.
func words(value string) (out []string, numbers bool) {
	for _, m := range regexp.MustCompile(`"((?:[^"\\]|\\.)*)"|[-+0-9.eE]+`).FindAllStringSubmatch(value, -1) {
		if m[0][0] == '"' {
			out = append(out, strings.NewReplacer(`\"`, `"`, `\\`, `\`).Replace(m[1]))
		} else {
			out, numbers = append(out, m[0]), true
		}
	}
	return out, numbers
}

// listed writes a list of texts or numbers.
func listed(items []string, numbers bool) string {
	out := make([]string, len(items))
	for i, s := range items {
		if out[i] = s; !numbers {
			out[i] = quoted(s)
		}
	}
	return "[" + strings.Join(out, ", ") + "]"
}
