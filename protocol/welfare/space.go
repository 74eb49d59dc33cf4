package welfare

import (
	"fmt"
	"slices"
	"strings"
)

// commercial is the aim that farm standards serve.
const commercial = "commercial conditions"

// masses finds the smallest body mass at the start and the largest at the end.
func (c *checker) masses() {
	from, to, ok := in(c.animals.Mass, "mass")
	if ok {
		c.least, c.most, c.mostKey = from, to, "animals.mass"
	}
	_, end, okEnd := in(c.animals.MassEnd, "mass")
	if okEnd && end >= c.most {
		c.most, c.mostKey = end, "animals.mass_end"
	}
	if okEnd && !ok {
		c.least = end
	}
	for _, q := range []struct {
		key     string
		stated  string
		present bool
	}{
		{"animals.mass", amount(c.animals.Mass), c.animals.Mass != nil && !ok},
		{"animals.mass_end", amount(c.animals.MassEnd), c.animals.MassEnd != nil && !okEnd},
	} {
		if q.present {
			c.uncompared("body mass", q.key, q.stated, "this is not read as a body mass, so that nothing is compared by it", "give it in kg or g")
		}
	}
}

// uncompared notes what was not compared and why.
func (c *checker) uncompared(about, key, stated, why, hint string) {
	c.add(Finding{Code: NotCompared, Level: Note, About: about, Key: key, Stated: stated, Text: why, Hint: hint})
}

// read says how the species was understood.
func (c *checker) read() {
	s := strings.TrimSpace(c.animals.Species)
	switch {
	case s == "":
		c.uncompared("species", "animals.species", "", "the species is not stated, so that no limit of a species is compared", "name the species")
	case c.animal == nil:
		c.uncompared("species", "animals.species", s, "the tables do not know this species by that name, so that no limit of a species is compared", "name one species in plain words, such as pig, cattle, sheep, fowl, mouse, rat")
	case !slices.Contains(c.animal.words, strings.Join(words(s), " ")):
		c.uncompared("species", "animals.species", s, "this is read as "+c.animal.name, "")
	}
}

// number is the number of animals kept together: the least and the most.
func (c *checker) number() (least, most int, key string) {
	if n := c.housing.GroupSize; n > 0 {
		return n, n, "housing.group_size"
	}
	least, most, key = c.perUnit()
	return least, most, key
}

// perUnit is the number of animals in the units of the plan that hold animals.
func (c *checker) perUnit() (least, most int, key string) {
	if c.plan == nil {
		return 0, 0, ""
	}
	for u := range c.plan.Units {
		for _, n := range c.plan.Units[u].Animals {
			if n <= 0 {
				continue
			}
			if most == 0 || n < least {
				least = n
			}
			most = max(most, n)
		}
		if most > 0 {
			return least, most, fmt.Sprintf("unit[%d].animals", u)
		}
	}
	return 0, 0, ""
}

// aims tells for a row whether it is applied: where the aim is stated the rows of the
// other aim are only shown.
func (c *checker) applies(l *Limit, farm bool) bool {
	switch {
	case l.Aim == "" || c.welfare.Aim == "":
		return true
	case c.welfare.Aim == commercial:
		return (l.Aim == commercial) == farm
	}
	return l.Aim == "laboratory"
}

// inBand tells whether the largest mass lies in the band of a row; a row without a
// band holds always.
func (c *checker) inBand(l *Limit) bool {
	if l.band.unit == "" {
		return true
	}
	u, ok := units[l.band.unit]
	if !ok { // a band of something that the protocol does not state
		return l.shown
	}
	return u.of == "mass" && c.most > 0 && l.band.holds(roundOff(c.most/u.factor))
}

// roundOff removes what a conversion of units may leave behind the twelfth digit.
func roundOff(x float64) float64 { return parsed(fmt.Sprintf("%.12g", x)) }

// space compares the floor with the tables of space.
func (c *checker) space() {
	floor := c.housing.FloorArea
	var all []Limit
	farm := false
	for _, l := range c.pick("space", "") {
		if c.inBand(&l) {
			all = append(all, l)
			farm = farm || l.Aim == commercial && !l.shown
		}
	}
	if c.animal == nil {
		return
	}
	if c.welfare.Aim == "" {
		f := Finding{Code: Aim, Level: Warning, About: "space", Key: "welfare.aim", Text: "the aim is not stated, so that the strictest of the laboratory and farm tables is compared",
			Hint: `write aim = "laboratory" or aim = "commercial conditions"`, Rules: []Rule{rule("commercial")}}
		if floor == nil {
			f.Level, f.Text = Note, "the aim is not stated, so that it is not known which tables of space serve the trial"
		}
		c.add(f)
	}
	if c.welfare.Aim == commercial && !farm && len(all) > 0 {
		c.uncompared("space", "welfare.aim", c.welfare.Aim, fmt.Sprintf("the tables have no farm standard of space for %s as the protocol describes it; laboratory tables are shown instead", c.name()), "say more of the kind of animal: broiler, laying hen, calf, sow")
	}
	known := 0
	for _, l := range loaded().limits {
		if l.Topic == "space" && c.animal.is(l.Species) {
			known++
		}
	}
	switch {
	case known == 0:
		c.uncompared("space", "housing.floor_area", amount(floor), fmt.Sprintf("the tables have no space for %s", c.name()), "look it up in the code of the place")
		return
	case c.most == 0 && banded(c.pick("space", "")):
		c.uncompared("space", "animals.mass_end", amount(floor), "the body mass is not known, so that the space for it is not compared", "give animals.mass_end, the mass expected at the end")
		return
	case floor == nil:
		c.uncompared("space", "housing.floor_area", "", "the floor area per animal is not stated, so that space is not compared", `give floor_area = { value = …, unit = "m2" } for each animal`)
		c.byHand(all, farm)
		return
	}
	if c.animal.is("fish") {
		c.water(all)
		return
	}
	area, _, ok := in(floor, "area")
	if !ok {
		c.uncompared("space", "housing.floor_area", amount(floor), "this is not read as an area, so that space is not compared", "give it in m2 or cm2")
		return
	}
	n, _, numberKey := c.number()
	c.floor(all, farm, area)
	c.whole(all, farm, area, n, numberKey)
	c.byHand(all, farm)
}

func banded(all []Limit) bool {
	for _, l := range all {
		if l.band.unit == "" && !l.shown {
			return false
		}
	}
	return true
}

// floor compares the floor of one animal, the number of animals on an area and the mass
// on an area, each in its own unit; the strictest is that which wants most floor.
func (c *checker) floor(all []Limit, farm bool, area float64) {
	n, _, _ := c.number()
	var quoted []Quoted
	best, worst := -1, 0.0 // the row that wants most floor, in m2
	for _, l := range all {
		var wants float64 // floor per animal in m2
		var x float64     // what the protocol states, in the unit of the row
		switch l.Quantity {
		case "floor per animal":
			wants = l.value * units[l.Unit].factor * c.share(&l, n)
			x = area / units[l.Unit].factor
			if l.animals.bounded[0] && (n == 0 || !l.animals.holds(float64(n))) {
				continue
			}
		case "animals per area":
			if l.Unit != "1/m2" {
				continue
			}
			wants, x = 1/l.value, 1/area
		case "live mass per area":
			if c.most == 0 {
				continue
			}
			wants, x = c.most/l.value, c.most/area
		default:
			continue
		}
		q := Quoted{Limit: l, Stated: about(x) + shown(l.Unit), Met: meets(area, wants, false)}
		quoted = append(quoted, q)
		if !l.shown && c.applies(&l, farm) && (best < 0 || wants > worst) {
			best, worst = len(quoted)-1, wants
		}
	}
	if best < 0 {
		return
	}
	quoted[best].Applied = true
	f := Finding{Code: Space, About: "floor per animal", Key: "housing.floor_area", Stated: c.floorWords(), Limits: quoted, Rules: []Rule{rule("final-mass")}}
	wants := c.inFloor(worst)
	if s := c.share(&quoted[best].Limit, n); s != 1 {
		wants += fmt.Sprintf(" (%s %% of the row for a group of %d)", digits(s*100), n)
	}
	if quoted[best].Met {
		f.Text = fmt.Sprintf("%s a head keeps to the strictest that applies, %s", amount(c.housing.FloorArea), wants)
		if !allMet(quoted) {
			f.Text += "; a table of another aim or class asks for more"
		}
	} else {
		f.Level = Warning
		f.Text = fmt.Sprintf("%s a head is less than %s, asked for by %s", amount(c.housing.FloorArea), wants, quoted[best].Where())
		f.Hint = "give more room, or say to the committee why less is needed and for how long"
		c.noFarm(&f, farm)
	}
	c.add(f)
}

// inFloor prints an area in m2 in the unit that the protocol uses for the floor.
func (c *checker) inFloor(m2 float64) string {
	u := c.housing.FloorArea.Unit
	return about(m2/units[u].factor) + shown(u)
}

// noFarm turns a warning by a laboratory table into a note where the aim is commercial
// conditions and there is no farm standard to stand in its place.
func (c *checker) noFarm(f *Finding, farm bool) {
	if c.welfare.Aim == commercial && !farm {
		f.Level, f.Hint = Note, ""
		f.Text += "; that table is for laboratories and is only shown"
	}
}

func allMet(q []Quoted) bool {
	return !slices.ContainsFunc(q, func(x Quoted) bool { return !x.Met && !x.shown })
}

func (c *checker) floorWords() string {
	s := amount(c.housing.FloorArea) + " per animal"
	if c.most > 0 && c.mostKey == "animals.mass_end" {
		s += " at " + amount(c.animals.MassEnd) + " at the end"
	} else if c.most > 0 {
		s += " at " + amount(c.animals.Mass) + " at the start; the mass at the end is not stated"
	}
	return s
}

// share is the part of a row's floor that a group of n asks for: more in small groups
// of sows and gilts, less in large ones.
func (c *checker) share(l *Limit, n int) float64 {
	if n == 0 || l.Class == "" || l.Aim != commercial {
		return 1
	}
	for _, x := range loaded().limits {
		if x.Quantity == "floor in percent of the row" && x.Class == l.Class && x.Source == l.Source && c.animal.is(x.Species) && x.animals.holds(float64(n)) {
			return x.value / 100
		}
	}
	return 1
}

// whole compares the floor of the whole group: the least enclosure, and the tables that
// count a group's first animals and each further one.
func (c *checker) whole(all []Limit, farm bool, area float64, n int, key string) {
	var quoted []Quoted
	best, worst := -1, 0.0
	counted := false
	consider := func(l Limit, wants float64) {
		l2 := l
		quoted = append(quoted, Quoted{Limit: l2, Stated: about(area*float64(n)/units[l.Unit].factor) + shown(l.Unit), Met: meets(area*float64(n), wants, false)})
		if c.applies(&l, farm) && (best < 0 || wants > worst) {
			best, worst = len(quoted)-1, wants
		}
	}
	if n == 0 {
		if slices.ContainsFunc(all, func(l Limit) bool { return l.Quantity == "enclosure" || l.Quantity == "area for a group" }) {
			c.uncompared("enclosure", "housing.group_size", "", "the number of animals kept together is not stated, so that the least enclosure is not compared", "give group_size")
		}
		return
	}
	for _, l := range all {
		if l.shown {
			continue
		}
		f := units[l.Unit].factor
		switch l.Quantity {
		case "enclosure":
			consider(l, l.value*f)
		case "area for a group", "floor per animal of a pair":
			if counted { // one sum for all its rows
				continue
			}
			counted = true
			wants, rows := sum(all, n)
			for k, r := range rows {
				if k == 0 {
					consider(r, wants)
					continue
				}
				quoted = append(quoted, Quoted{Limit: r, Met: meets(area*float64(n), wants, false)})
			}
		}
	}
	if best < 0 {
		return
	}
	quoted[best].Applied = true
	f := Finding{Code: Enclosure, About: "floor of the group", Key: "housing.floor_area", Limits: quoted,
		Stated: fmt.Sprintf("%s on %s in all", animals(n), c.inFloor(area*float64(n)))}
	if quoted[best].Met {
		f.Text = fmt.Sprintf("the floor of the group keeps to the least that applies, %s", c.inFloor(worst))
	} else {
		f.Level = Warning
		f.Text = fmt.Sprintf("%s for a group of %d is less than %s, asked for by %s", c.inFloor(area*float64(n)), n, c.inFloor(worst), quoted[best].Where())
		f.Hint = "give the group more room, or say to the committee why less is needed"
		c.noFarm(&f, farm)
	}
	if key == "" {
		f.Key = "housing.floor_area"
	}
	c.add(f)
}

// sum is the floor in m2 that a group of n asks for by rows that count its first animals
// and each further one, with the rows it rests on, the base first.
func sum(all []Limit, n int) (float64, []Limit) {
	base, upTo := -1, 0.0
	for i := range all {
		l := &all[i]
		if l.Quantity != "area for a group" && l.Quantity != "floor per animal of a pair" {
			continue
		}
		if l.animals.holds(float64(n)) {
			base, upTo = i, float64(n)
			break
		}
		if l.animals.high < float64(n) && l.animals.high > upTo {
			base, upTo = i, l.animals.high
		}
	}
	if base < 0 {
		return 0, nil
	}
	rows := []Limit{all[base]}
	total := all[base].value * units[all[base].Unit].factor
	if all[base].Quantity == "floor per animal of a pair" {
		total *= upTo
	}
	for _, l := range all {
		if l.Quantity != "area per further animal" {
			continue
		}
		extra := 0
		for k := int(upTo) + 1; k <= n && k < 1<<20; k++ {
			if l.animals.holds(float64(k)) {
				extra++
			}
		}
		if extra > 0 {
			total += float64(extra) * l.value * units[l.Unit].factor
			rows = append(rows, l)
		}
	}
	return total, rows
}

// byHand lists the numbers for which the protocol has no key.
func (c *checker) byHand(all []Limit, farm bool) {
	var quoted []Quoted
	var what []string
	for _, l := range all {
		if l.shown && (l.Class == "" || slices.Contains(c.classes, l.Class)) && c.applies(&l, farm) && l.Quantity != "floor in percent of the row" {
			quoted = append(quoted, Quoted{Limit: l})
			if !slices.Contains(what, l.Quantity) {
				what = append(what, l.Quantity)
			}
		}
	}
	if len(quoted) > 0 {
		c.add(Finding{Code: NotCompared, Level: Note, About: "further dimensions", Key: "housing", Limits: quoted,
			Text: "the protocol has no key for " + join(what) + "; see to it by hand"})
	}
}

func join(s []string) string {
	if len(s) < 2 {
		return strings.Join(s, "")
	}
	return strings.Join(s[:len(s)-1], ", ") + " and " + s[len(s)-1]
}

// water compares the animals in a volume of water; the area of a floor says nothing of
// fish.
func (c *checker) water(all []Limit) {
	volume, _, ok := in(c.housing.FloorArea, "volume")
	var quoted []Quoted
	for _, l := range all {
		if l.Quantity == "animals per volume" && ok {
			quoted = append(quoted, Quoted{Limit: l, Stated: about(1/volume) + shown(l.Unit), Met: l.met(1 / volume)})
		}
	}
	best, any := strictest(quoted)
	if !any {
		c.uncompared("space", "housing.floor_area", amount(c.housing.FloorArea), "no number of the tables applies to fish kept so; density and flow are those of the species", "give the volume for one animal in L where the species is zebrafish")
		return
	}
	f := Finding{Code: Space, About: "volume of water", Key: "housing.floor_area", Stated: amount(c.housing.FloorArea) + " per animal", Limits: quoted, Text: "the density keeps to the limit"}
	if !quoted[best].Met {
		f.Level, f.Text, f.Hint = Warning, fmt.Sprintf("%s is above %s, the limit of %s", quoted[best].Stated, quoted[best].Printed+shown(quoted[best].Unit), quoted[best].Where()), "keep fewer animals in the volume, or say to the committee why"
	}
	c.later(&f)
	c.add(f)
}

// group compares the number of animals that live together.
func (c *checker) group() {
	if c.animal != nil && c.animal.is("fish") {
		return
	}
	least, most, key := c.number()
	perLeast, perMost, perKey := c.perUnit()
	if c.housing.GroupSize > 0 && perMost > 0 && (perLeast > c.housing.GroupSize || perMost < c.housing.GroupSize) {
		c.add(Finding{Code: Group, Level: Note, About: "group", Key: perKey, Stated: fmt.Sprintf("group_size %d, units of %s", c.housing.GroupSize, span(perLeast, perMost)),
			Text: "the size of the group and the animals of a unit differ; space is compared by the size of the group"})
	}
	rules := []Rule{rule("groups"), rule("guide-single")}
	said := slices.ContainsFunc(c.welfare.Procedures, isSingle)
	switch {
	case most == 0:
		if !said {
			c.uncompared("group", "housing.group_size", "", "how many animals live together is not stated", "give group_size")
		}
	case least == 1 && !said:
		c.add(Finding{Code: Group, Level: Warning, About: "group", Key: key, Stated: "one animal", Text: "animals live singly and no reason is stated",
			Hint: `keep social animals in stable groups, or describe a [[welfare.procedure]] of kind "single housing" with why and duration`, Rules: rules})
	case least > 1:
		c.add(Finding{Code: Group, About: "group", Key: key, Stated: span(least, most) + " animals", Text: "animals live in groups", Rules: rules})
	}
	if _, oldest, ok := c.ageAtEnd(); ok && slices.Contains(c.classes, "calf") && least == 1 {
		for _, l := range c.pick("space", "age in an individual pen") {
			x := oldest / units["wk"].factor
			q := []Quoted{{Limit: l, Stated: about(x) + shown("wk") + " at the end", Met: l.met(x), Applied: true}}
			f := Finding{Code: Group, About: "individual pen", Key: "animals.age", Stated: q[0].Stated, Limits: q, Text: "the calves leave their individual pens in time"}
			if !q[0].Met {
				f.Level, f.Text, f.Hint = Warning, "calves are in individual pens beyond "+l.Printed+shown(l.Unit)+", the limit of "+l.Where(), "put them in groups, or give the veterinarian’s reason"
			}
			c.add(f)
		}
	}
}

func animals(n int) string {
	if n == 1 {
		return "one animal"
	}
	return fmt.Sprintf("%d animals", n)
}

func span(a, b int) string {
	if a == b {
		return fmt.Sprint(a)
	}
	return fmt.Sprintf("%d to %d", a, b)
}

// ageAtEnd is the age in days when the trial ends, where both are stated.
func (c *checker) ageAtEnd() (from, to float64, ok bool) {
	from, to, ok = in(c.animals.Age, "time")
	t := c.p.Trial
	if !ok || t.Start.IsZero() || t.End.IsZero() {
		return from, to, ok
	}
	d := float64(dayNumber(t.End) - dayNumber(t.Start))
	return from + d, to + d, true
}
