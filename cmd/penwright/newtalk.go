package main

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"penwright/analysis/trial"
	"penwright/protocol/folder"
	"penwright/templates"
)

// choice is an answer that a menu offers.
type choice struct{ key, words string }

// treated lists what may be treated, with the starter whose description of it serves.
var treated = []struct{ words, starter string }{
	{"pigs", "randomized-block"},
	{"broilers", "carried-class"},
	{"laying hens", "generalized-block"},
	{"cattle", "latin-squares"},
	{"sheep or goats", "covariate"},
	{"mice or other laboratory rodents", "completely-randomized"},
	{"fish", "factorial"},
	{"other animals", "randomized-block"},
	{"field plots", "split-plot"},
	{"plants in pots or trays", "incomplete-block"},
	{"samples in a laboratory", "graeco-latin-square"},
}

// situation is a way in which treatments are given, with the designs that serve it.
type situation struct {
	words   string
	designs []choice
}

// situations lead to every starter.
var situations = []situation{
	{"each unit gets one treatment and keeps it", []choice{
		{"completely-randomized", "units are alike and stand in no groups"},
		{"randomized-block", "units are grouped in blocks of like ones; each block holds every treatment"},
		{"generalized-block", "the same, and each block holds every treatment several times"},
		{"latin-square", "units stand in rows and columns, as many of each as treatments"},
		{"covariate", "something measured beforehand is to be taken out of the error"},
		{"sampling", "several animals or samples are measured in each unit"},
		{"carried-class", "units are of classes, such as sexes, that cannot be allotted"},
		{"repeated-measures", "each unit is measured at several times"},
		{"several-sites", "the same blocks and treatments stand at several sites"},
	}},
	{"the treatments are combinations of several factors", []choice{
		{"factorial", "all combinations"},
		{"factorial-control", "all combinations, and a control outside of them"},
		{"graeco-latin-square", "two factors that do not interact, in rows and columns"},
	}},
	{"some treatments need large units, others are given to parts of them", []choice{
		{"split-plot", "two sizes of units, the larger in blocks"},
		{"split-plot-latin-square", "two sizes of units, the larger in rows and columns"},
		{"split-split-plot", "three sizes of units"},
		{"strip-plot", "strips laid across each other"},
	}},
	{"units get one treatment after another", []choice{
		{"latin-squares", "each gets every treatment, in several squares"},
		{"crossover", "the same, and what a treatment leaves behind is estimated"},
		{"switchback", "from one treatment to another and back again"},
	}},
	{"there are more treatments than a block can hold", []choice{
		{"incomplete-block", "blocks of a few units"},
		{"lattice", "small blocks inside replicates that hold every treatment, in a square"},
		{"alpha", "the same, of any shape"},
		{"row-column", "rows and columns that are no square"},
		{"augmented", "most treatments stand once, a few checks in every block"},
	}},
}

// allStarters names every starter, in the order of the situations.
func allStarters() []string {
	var out []string
	for _, s := range situations {
		for _, d := range s.designs {
			out = append(out, d.key)
		}
	}
	return out
}

var errEnded = status{code: misuse, err: errors.New("the answers ended before the last question; nothing was written")}

// talker asks questions and reads answers.
type talker struct {
	in  *bufio.Scanner
	out io.Writer
}

// ask puts a question until its answer is accepted. Without an answer it is what stands
// in brackets, if anything does. accept gives the answer to keep, or why there is none.
func (t *talker) ask(question, otherwise string, accept func(string) (string, error)) (string, error) {
	for {
		fmt.Fprint(t.out, question)
		if otherwise != "" {
			fmt.Fprintf(t.out, " [%s]", otherwise)
		}
		fmt.Fprint(t.out, ": ")
		if !t.in.Scan() {
			fmt.Fprintln(t.out)
			if err := t.in.Err(); err != nil {
				return "", status{code: misuse, err: fmt.Errorf("the answer cannot be read (%w); nothing was written", err)}
			}
			return "", errEnded
		}
		if !utf8.ValidString(t.in.Text()) || strings.ContainsFunc(strings.TrimSpace(t.in.Text()), unicode.IsControl) {
			fmt.Fprintln(t.out, "  without control characters, and in UTF-8, please")
			continue
		}
		s := strings.Join(strings.Fields(t.in.Text()), " ")
		if s == "" {
			s = otherwise
		}
		kept, err := accept(s)
		if err == nil {
			return kept, nil
		}
		fmt.Fprintf(t.out, "  %v\n", err)
	}
}

// menu asks for one of several choices, by number, and gives its index.
func (t *talker) menu(question string, words []string) (int, error) {
	fmt.Fprintf(t.out, "\n%s\n", question)
	for i, w := range words {
		fmt.Fprintf(t.out, "  %2d  %s\n", i+1, w)
	}
	s, err := t.ask("number", "", func(s string) (string, error) {
		if n, err := strconv.Atoi(s); err != nil || n < 1 || n > len(words) {
			return "", fmt.Errorf("a number from 1 to %d", len(words))
		}
		return s, nil
	})
	if err != nil {
		return 0, err
	}
	n, err := strconv.Atoi(s)
	return n - 1, err
}

// say asks for words; empty ones are refused.
func (t *talker) say(question, otherwise string) (string, error) {
	return t.ask(question, otherwise, func(s string) (string, error) {
		if s == "" {
			return "", errors.New("a few words are needed here")
		}
		return s, nil
	})
}

// count asks for a whole number.
func (t *talker) count(question string, otherwise, least int) (int, error) {
	s, err := t.ask(question, strconv.Itoa(otherwise), func(s string) (string, error) {
		if n, err := strconv.Atoi(s); err != nil || n < least || n > 100_000 {
			return "", fmt.Errorf("a whole number from %d to 100000", least)
		}
		return s, nil
	})
	if err != nil {
		return 0, err
	}
	return strconv.Atoi(s)
}

// number asks for a number above 0 that may be left out.
func (t *talker) number(question string) (string, error) {
	return t.ask(question+" (Enter: later)", "", func(s string) (string, error) {
		if x, err := strconv.ParseFloat(s, 64); s != "" && (err != nil || !(x > 0) || x > 1e12) {
			return "", errors.New("a number above 0, with a point for decimals")
		} else if s != "" {
			s = strconv.FormatFloat(x, 'f', -1, 64)
		}
		return s, nil
	})
}

// name makes a column name of words: lower case, digits and underscores.
func name(s string) string {
	var b strings.Builder
	for _, r := range strings.ToLower(s) {
		switch {
		case r >= 'a' && r <= 'z', r >= '0' && r <= '9' && b.Len() > 0:
			b.WriteRune(r)
		case b.Len() > 0 && !strings.HasSuffix(b.String(), "_"):
			b.WriteByte('_')
		}
	}
	return strings.Trim(b.String()[:min(b.Len(), 40)], "_")
}

// draft is a starter on its way to somebody's trial.
type draft struct {
	talker
	text
	design   string
	names    map[string]string // old → new, of units, factors, responses, covariates
	taken    map[string]bool   // new names
	was, is  map[string]int    // levels of each factor, before and after, by old name
	numeric  bool              // some factor has amounts
	control  bool              // some factor has a control
	animals  bool
	response string // unit of the first response
	class    []string
	counts   map[string][]int // units in each parent, or in all, by old name
	checks   int
	entries  int
}

// converse asks what is treated, how, and with what numbers, and gives the files of a
// trial: the starter that the answers lead to, with their names and numbers. What it
// said of its own trial stands there as comments.
func converse(in *bufio.Scanner, out io.Writer, dir string) ([]folder.Change, error) {
	t := talker{in: in, out: out}
	fmt.Fprintln(out, "A few questions; Enter takes what stands in [brackets]. All of it can be changed later in the file.")
	var words []string
	for _, k := range treated {
		words = append(words, k.words)
	}
	kind, err := t.menu("What is treated?", words)
	if err != nil {
		return nil, err
	}
	words = nil
	for _, s := range situations {
		words = append(words, s.words)
	}
	how, err := t.menu("How are the treatments given?", words)
	if err != nil {
		return nil, err
	}
	words = nil
	for _, d := range situations[how].designs {
		words = append(words, d.words)
	}
	which, err := t.menu("Which of these comes nearest?", words)
	if err != nil {
		return nil, err
	}
	d := &draft{talker: t, text: starterText(situations[how].designs[which].key), design: situations[how].designs[which].key,
		names: map[string]string{}, taken: map[string]bool{}, was: map[string]int{}, is: map[string]int{}, counts: map[string][]int{}}
	fmt.Fprintln(out)
	for _, step := range []func() error{func() error { return d.material(kind) }, func() error { return d.trial(dir) }, d.factors, d.treatments, d.units, d.responses, d.size} {
		if err := step(); err != nil {
			return nil, err
		}
	}
	d.analysis()
	d.rename(d.names)
	files := []folder.Change{{Path: trial.ProtocolFile, How: folder.Create, Data: []byte(strings.Join(d.lines, "\n"))}}
	if d.class != nil {
		files = append(files, folder.Change{Path: "roster.csv", How: folder.Create, Data: []byte(d.roster())})
	}
	return files, nil
}

func starterText(name string) text {
	data, err := fs.ReadFile(templates.FS, path.Join("start", name, trial.ProtocolFile))
	if err != nil {
		panic("main: a built-in starter cannot be read")
	}
	return text{lines: strings.Split(string(data), "\n")}
}

// material takes the description of what is treated from the starter that has it.
func (d *draft) material(kind int) error {
	from := starterText(treated[kind].starter)
	s := from.section("What is treated")
	part := text{lines: slices.Clone(from.lines[s.from:s.to])}
	key, question, blocks := "species", "Species", part.blocks("animals")
	if d.animals = len(blocks) > 0; !d.animals {
		key, question, blocks = "crop", "Crop or material", part.blocks("material")
	}
	b := blocks[0]
	offered := ""
	if was, _ := words(part.get(b, key)); treated[kind].words != "other animals" {
		offered = was[0]
	}
	is, err := d.say(question, offered)
	if err != nil {
		return err
	}
	part.set(&b, key, quoted(is))
	at, _ := part.find(b, key)
	for i := range part.lines {
		if i != 0 && i != b.from && i != at {
			part.muteLines(i, i+1)
		}
	}
	d.replace(d.section("What is treated"), part.lines)
	return nil
}

// trial asks what the trial is called and is for.
func (d *draft) trial(dir string) error {
	b := d.blocks("trial")[0]
	code, err := d.say("Code of the trial, as on its sheets", strings.ToUpper(filepath.Base(filepath.Clean(dir))))
	if err != nil {
		return err
	}
	objective, err := d.say("What shall it find out, in one sentence", "")
	if err != nil {
		return err
	}
	title, err := d.say("Title", strings.TrimRight(objective, "?. "))
	if err != nil {
		return err
	}
	d.set(&b, "code", quoted(code))
	d.set(&b, "title", quoted(title))
	d.set(&b, "objective", quoted(objective))
	d.mute(b, "background", "species_rationale", "hypotheses", "site", "start", "end", "registration", "funding", "interests", "data_access")
	for _, b := range d.blocks("person") {
		d.mute(b)
	}
	draw := d.blocks("randomization")[0]
	d.set(&draw, "seed", quoted(code+"/1"))
	d.mute(draw, "by")
	for _, b := range d.blocks("blinding") {
		d.mute(b)
	}
	for i, l := range d.lines {
		if strings.HasPrefix(l, "# Everything named here") {
			d.lines = slices.Replace(d.lines, i, i+3,
				"# Lines that are commented out are examples from the invented farm Hollowmere: write your own over",
				"# them and take the mark off. What a guideline asks and is not stated shows in the report as a gap,",
				"# never as an error. After each change: penwright check")
			break
		}
	}
	return nil
}

// called asks for words that become a label and a name, and gives both. It offers the
// label there is.
func (d *draft) called(question string, b *block, more ...string) (label string, err error) {
	old, _ := words(d.get(*b, "name"))
	offered := old
	if l, _ := words(d.get(*b, "label")); len(l) > 0 {
		offered = l
	}
	label, err = d.ask(question, offered[0], func(s string) (string, error) {
		n := name(s)
		switch {
		case s == offered[0]:
			n = old[0]
		case n == "":
			return "", errors.New("a name with letters is needed")
		case slices.Contains([]string{"order", "code", "treatment", "residual", "checks", "entries", "unit", "in", "not", "and", "or", "let", "if", "else", "true", "false", "nil", "matches", "contains", "log", "sqrt", "min", "max", "abs"}, n):
			return "", fmt.Errorf("%q means something else in the files; another word, please", n)
		}
		if d.taken[n] {
			return "", fmt.Errorf("%q is taken; another word, please", n)
		}
		d.names[old[0]] = n
		return s, nil
	})
	if err != nil {
		return "", err
	}
	d.taken[d.names[old[0]]] = true
	if d.get(*b, "label") != "" {
		d.set(b, "label", quoted(label))
	}
	return label, nil
}

// levels reads an answer: names with commas, or how many there are.
func levels(label string) func(string) (string, error) {
	return func(s string) (string, error) {
		var items []string
		for _, x := range strings.Split(s, ",") {
			x = strings.TrimSpace(x)
			if x == "" || slices.Contains(items, x) {
				return "", errors.New("every level once, with commas between them, or how many there are")
			}
			items = append(items, x)
		}
		if n, err := strconv.Atoi(s); err == nil {
			if n < 2 || n > 1000 {
				return "", errors.New("from 2 to 1000 levels")
			}
			items = nil
			short := "t"
			if l := name(label); l != "" {
				short = l[:1]
			}
			for i := range n {
				items = append(items, fmt.Sprintf("%s%d", short, i+1))
			}
		}
		if len(items) < 2 {
			return "", errors.New("two levels at least")
		}
		return strings.Join(items, ", "), nil
	}
}

// amounts tells whether all levels are numbers, and writes them as TOML does.
func amounts(items []string) bool {
	out := make([]string, len(items))
	for i, s := range items {
		x, err := strconv.ParseFloat(s, 64)
		if err != nil || x != x || x > 1e15 || x < -1e15 {
			return false
		}
		out[i] = strconv.FormatFloat(x, 'f', -1, 64)
	}
	copy(items, out)
	return true
}

// factors asks for the name and the levels of every factor.
func (d *draft) factors() error {
	carried := map[string]bool{}
	for _, b := range d.blocks("unit") {
		c, _ := words(d.get(b, "carries"))
		for _, s := range c {
			carried[s] = true
		}
	}
	for k := range d.blocks("factor") {
		b := d.blocks("factor")[k]
		old, _ := words(d.get(b, "name"))
		question := "What is compared: the factor"
		if k > 0 {
			question = "The next factor"
		}
		if carried[old[0]] {
			question = "The class that units are of"
		}
		label, err := d.called(question, &b)
		if err != nil {
			return err
		}
		was, _ := words(d.get(b, "levels"))
		short := strings.Join(was, ", ")
		if len(was) > 8 {
			short = strconv.Itoa(len(was))
		}
		s, err := d.ask("  its levels, with commas between them, or how many", short, levels(label))
		if err != nil {
			return err
		}
		is := strings.Split(s, ", ")
		numbers := amounts(is)
		if numbers {
			unit, _ := words(d.get(b, "unit"))
			offered := ""
			if len(unit) > 0 && slices.Equal(is, was) {
				offered = unit[0]
			}
			u, err := d.say("  in which unit", offered)
			if err != nil {
				return err
			}
			d.set(&b, "unit", quoted(u))
		} else {
			d.mute(b, "unit")
		}
		d.was[old[0]], d.is[old[0]] = len(was), len(is)
		d.set(&b, "levels", listed(is, numbers))
		d.mute(b, "describe")
		d.numeric = d.numeric || numbers
		if carried[old[0]] {
			d.class = is
			continue
		}
		if d.get(b, "control") == "" {
			continue
		}
		offered := is[0]
		if c, _ := words(d.get(b, "control")); slices.Contains(is, c[0]) {
			offered = c[0]
		}
		c, err := d.ask("  the one that others are compared with, or none", offered, func(s string) (string, error) {
			if s != "none" && !slices.Contains(is, s) {
				return "", fmt.Errorf("one of %s, or none", strings.Join(is, ", "))
			}
			return s, nil
		})
		if err != nil {
			return err
		}
		if c == "none" && !slices.Contains(is, "none") {
			d.mute(b, "control")
			continue
		}
		d.control = true
		if !numbers {
			c = quoted(c)
		}
		d.set(&b, "control", c)
	}
	return nil
}

// treatments writes the list of treatments anew, where the starter has one.
func (d *draft) treatments() error {
	all := d.blocks("treatment")
	if len(all) == 0 {
		return nil
	}
	d.control = true
	whole := block{from: all[0].from, to: all[len(all)-1].to}
	var lines []string
	if len(d.blocks("factor")) > 0 { // a control and all combinations
		lines = append(lines, "[[treatment]]", `code = "none"`, "levels = {}                       # outside the factorial", "control = true")
		type factor struct {
			name   string
			levels []string
			number bool
		}
		var fs []factor
		n := 1
		for _, b := range d.blocks("factor") {
			f := factor{}
			x, _ := words(d.get(b, "name"))
			f.name = x[0]
			f.levels, f.number = words(d.get(b, "levels"))
			if n *= len(f.levels); n > 1000 {
				return status{code: misuse, err: errors.New("these levels make more than a thousand combinations; nothing was written")}
			}
			fs = append(fs, f)
		}
		for i := range n {
			at, of := i, make([]string, len(fs))
			for k := len(fs) - 1; k >= 0; k-- {
				l := fs[k].levels[at%len(fs[k].levels)]
				if at /= len(fs[k].levels); !fs[k].number {
					l = quoted(l)
				}
				of[k] = fs[k].name + " = " + l
			}
			lines = append(lines, "", "[[treatment]]", fmt.Sprintf(`code = "t%d"`, i+1), "levels = { "+strings.Join(of, ", ")+" }")
		}
		d.was["treatment"], d.is["treatment"] = 8, n+2
		d.replace(whole, lines)
		return nil
	}
	unit := d.blocks("unit")
	last := unit[len(unit)-1]
	was, _ := words(d.get(last, "checks"))
	s, err := d.ask("The checks that stand in every block, with commas between them", strings.Join(was, ", "), levels("check"))
	if err != nil {
		return err
	}
	checks := strings.Split(s, ", ")
	d.checks = len(checks)
	d.entries, err = d.count("How many entries, each on one plot", len(all)-len(was), 1)
	if err != nil {
		return err
	}
	d.set(&last, "checks", listed(checks, false))
	for i, c := range checks {
		lines = append(lines, "[[treatment]]", "code = "+quoted(c))
		if i == 0 {
			lines = append(lines, "control = true                    # the check that others are compared with")
		}
	}
	lines = append(lines, "", "# The entries, each once in the whole trial.")
	for i := range d.entries {
		code := fmt.Sprintf("N%02d", i+1)
		if slices.Contains(checks, code) {
			code = "entry " + code
		}
		lines = append(lines, "[[treatment]]", "code = "+quoted(code))
	}
	d.replace(whole, lines)
	return nil
}

// units asks what the units are called, how many there are, and what groups them.
func (d *draft) units() error {
	var was []string
	for _, b := range d.blocks("unit") {
		n, _ := words(d.get(b, "name"))
		was = append(was, n[0])
	}
	var is []string
	_, err := d.ask("The units, from the largest to the smallest", strings.Join(was, ", "), func(s string) (string, error) {
		is = strings.Split(s, ",")
		if len(is) != len(was) {
			return "", fmt.Errorf("%d names with commas between them, as %s", len(was), strings.Join(was, ", "))
		}
		seen := map[string]bool{}
		for i := range is {
			is[i] = strings.ToLower(strings.TrimSpace(is[i]))
			n := name(is[i])
			if n == "" || seen[n] || d.taken[n] || n == "order" || n == "code" || n == "treatment" {
				return "", fmt.Errorf("%q is no name for a unit, or is taken", is[i])
			}
			seen[n] = true
		}
		return s, nil
	})
	if err != nil {
		return err
	}
	for i := range was {
		n := name(is[i])
		d.names[was[i]], d.taken[n] = n, true
		if n != is[i] && strings.ReplaceAll(n, "_", " ") != is[i] {
			b := d.blocks("unit")[i]
			d.set(&b, "label", quoted(is[i]))
		}
	}
	label := func(unit string) string { return is[slices.Index(was, unit)] }
	for i, unit := range was {
		b := d.blocks("unit")[i]
		if d.get(b, "count") != "" {
			if err := d.count1(&b, unit, label); err != nil {
				return err
			}
		}
		if basis, _ := words(d.get(b, "basis")); len(basis) > 0 {
			s, err := d.say("  what they are formed by", basis[0])
			if err != nil {
				return err
			}
			d.set(&b, "basis", quoted(s))
		}
		switch animals := d.get(b, "animals"); {
		case animals == "":
		case !d.animals:
			d.mute(b, "animals")
		default:
			offered, err := strconv.Atoi(animals)
			if err != nil {
				panic("main: a starter's number of animals is no number")
			}
			n, err := d.count("  animals in each "+is[i], offered, 1)
			if err != nil {
				return err
			}
			d.set(&b, "animals", strconv.Itoa(n))
		}
	}
	return nil
}

// count1 asks how many there are of a unit. What is offered keeps to the starter's
// proportion of units to treatments.
func (d *draft) count1(b *block, unit string, label func(string) string) error {
	was, err := strconv.Atoi(d.get(*b, "count"))
	if err != nil {
		panic("main: a starter's number of units is no number")
	}
	parent := ""
	place := "in the whole trial"
	if w, _ := words(d.get(*b, "within")); len(w) > 0 {
		parent, place = w[0], "in each "+label(w[0])
	}
	if d.checks > 0 && d.get(*b, "checks") != "" {
		// Every block holds the checks; the entries are shared out as evenly as can be.
		blocks := d.counts[parent][0]
		if d.entries < blocks {
			return status{code: misuse, err: errors.New("there are fewer entries than blocks; nothing was written")}
		}
		var counts []string
		for i := range blocks {
			n := d.entries / blocks
			if i < d.entries%blocks {
				n++
			}
			counts = append(counts, strconv.Itoa(d.checks+n))
		}
		if d.entries%blocks == 0 {
			d.set(b, "count", counts[0])
			return nil
		}
		d.set(b, "count", listed(counts, true))
		return nil
	}
	t, now := d.treats(unit)
	offered := was
	switch {
	case d.design == "lattice" || d.design == "alpha":
		// Blocks times plots in a block make the treatments.
		size := 1
		for k := 2; k*k <= now; k++ {
			if now%k == 0 {
				size = k
			}
		}
		t, now = d.treats("plot")
		switch unit {
		case "block":
			for k := 2; k*k <= now; k++ {
				if now%k == 0 {
					size = k
				}
			}
			if offered = now / size; now == t {
				offered = was
			}
		case "plot":
			if n := d.counts["block"][0]; now%n == 0 {
				offered = now / n
			}
		}
	case t > 0 && was%t == 0:
		offered = was / t * now
	}
	n, err := d.count(label(unit)+": how many "+place, offered, 1)
	if err != nil {
		return err
	}
	d.counts[unit] = []int{n}
	d.set(b, "count", strconv.Itoa(n))
	if n != was {
		d.mute(*b, "labels")
	}
	return nil
}

// treats tells how many treatments a unit receives, or those that cross it, in the
// starter and now; 0 where none.
func (d *draft) treats(unit string) (was, is int) {
	for _, b := range d.blocks("unit") {
		n, _ := words(d.get(b, "name"))
		crosses, _ := words(d.get(b, "crosses"))
		receives, _ := words(d.get(b, "receives"))
		if len(receives) == 0 || n[0] != unit && !slices.Contains(crosses, unit) {
			continue
		}
		was, is = 1, 1
		for _, f := range receives {
			was, is = was*d.was[f], is*d.is[f]
			if d.design == "graeco-latin-square" {
				break // each factor by itself
			}
		}
	}
	return was, is
}

// responses asks what is measured.
func (d *draft) responses() error {
	unit := func(b *block) (string, error) {
		old, _ := words(d.get(*b, "unit"))
		u, err := d.say("  in which unit (1 for a pure number)", old[0])
		if err != nil {
			return "", err
		}
		d.set(b, "unit", quoted(u))
		return u, nil
	}
	b := d.blocks("response")[0]
	if _, err := d.called("What is measured: the response that decides", &b); err != nil {
		return err
	}
	u, err := unit(&b)
	if err != nil {
		return err
	}
	d.response = u
	d.mute(b, "how", "instrument", "assessed", "range", "decimals")
	for _, b := range d.blocks("covariate") {
		if _, err := d.called("What is measured beforehand: the covariate", &b); err != nil {
			return err
		}
		if _, err := unit(&b); err != nil {
			return err
		}
		d.mute(b, "measured")
	}
	for _, b := range d.blocks("repeated") {
		was, _ := words(d.get(b, "at"))
		s, err := d.ask("The times at which it is measured, with commas between them", strings.Join(was, ", "), levels("t"))
		if err != nil {
			return err
		}
		at := strings.Split(s, ", ")
		d.set(&b, "at", listed(at, amounts(at)))
		if _, err := unit(&b); err != nil {
			return err
		}
	}
	return nil
}

// size asks what the number of units rests on, where the starter rests it on power.
func (d *draft) size() error {
	b := d.blocks("sample_size")[0]
	if d.get(b, "difference") == "" {
		d.set(&b, "basis", `"error df"`)
		d.mute(b, "source")
		return nil
	}
	difference, err := d.number("The smallest difference that would matter, in " + d.response)
	if err != nil {
		return err
	}
	if difference == "" {
		d.mute(b)
		return nil
	}
	var sds []string
	value := d.get(b, "sd")
	if !strings.HasPrefix(value, "{") {
		s, err := d.number("The standard deviation between units of one treatment, in " + d.response)
		if err != nil {
			return err
		}
		sds = append(sds, s)
		value = s
	} else {
		var parts []string
		for _, p := range strings.Split(strings.Trim(value, "{ }"), ",") {
			unit := strings.TrimSpace(strings.SplitN(p, "=", 2)[0])
			s, err := d.number("The standard deviation between units " + strings.ReplaceAll(d.names[unit], "_", " ") + " of one treatment, in " + d.response)
			if err != nil {
				return err
			}
			sds = append(sds, s)
			parts = append(parts, unit+" = "+s)
		}
		value = "{ " + strings.Join(parts, ", ") + " }"
	}
	if slices.Contains(sds, "") {
		d.mute(b)
		return nil
	}
	d.set(&b, "difference", difference)
	d.set(&b, "sd", value)
	d.mute(b, "source", "attrition")
	return nil
}

// analysis brings what is planned in line with the treatments.
func (d *draft) analysis() {
	b := d.blocks("analysis")[0]
	comparison := d.get(b, "comparison")
	if comparison == `"none"` && !d.numeric || comparison == `"dunnett"` && !d.control {
		d.set(&b, "comparison", `"tukey"`)
	}
	if !d.numeric {
		d.mute(b, "trend")
	}
}

// roster lists the units with classes in turn, as an example to write over.
func (d *draft) roster() string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s,%s,%s\n", d.names["block"], d.names["pen"], d.names["sex"])
	for i := range d.counts["block"][0] {
		n := d.counts["pen"][0]
		for k := range n {
			class := d.class[k*len(d.class)/n]
			if strings.ContainsAny(class, `,"`) {
				class = `"` + strings.ReplaceAll(class, `"`, `""`) + `"`
			}
			fmt.Fprintf(&b, "%d,%d,%s\n", i+1, k+1, class)
		}
	}
	return b.String()
}
