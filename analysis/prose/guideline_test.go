package prose

import (
	"fmt"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/folder"
	"penwright/protocol/welfare"
)

// What says something, and what only holds a place.
func TestAdequate(t *testing.T) {
	fact, text, sentence := welfare.Key{Fact: true}, welfare.Key{}, welfare.Key{Sentence: true}
	for _, tt := range []struct {
		text string
		kind welfare.Key
		want bool
	}{
		{text: "", kind: fact}, {text: " \n ", kind: fact}, {text: "…", kind: fact}, {text: "...", kind: text}, {text: "none", kind: fact}, {text: "n/a", kind: fact},
		{text: "N.A.", kind: fact}, {text: "TBD", kind: fact}, {text: "?", kind: fact}, {text: "xxx", kind: fact}, {text: "-", kind: fact}, {text: "m", kind: fact},
		{text: "not applicable", kind: fact}, {text: "not applicable here", kind: text}, {text: "to be determined", kind: text}, {text: "to be decided by the committee", kind: text},
		{text: "as usual", kind: text}, {text: "as usual on our farm", kind: text}, {text: "see above", kind: text}, {text: "see the protocol of trial 7", kind: text},
		{text: "As published: Nature 5, 12", kind: text}, {text: "same as before", kind: text}, {text: "none none none", kind: text}, {text: "pigs pigs pigs pigs", kind: text},
		{text: "x y z", kind: text}, {text: "… … …", kind: text}, {text: "lorem ipsum dolor sit amet", kind: text}, {text: "none declared", kind: text}, {text: "healthy", kind: text},
		{text: "TODO write this", kind: text}, {text: "fill in later", kind: text}, {text: "masks", kind: text}, {text: "Pigs gain.", kind: sentence}, {text: "a b c d e f g", kind: sentence},
		{text: "The farm’s own herd.", kind: sentence},

		{text: "pig", kind: fact, want: true}, {text: "masked", kind: fact, want: true}, {text: "2025", kind: fact, want: true}, {text: "ad libitum", kind: fact, want: true},
		{text: "none: internal trial", kind: text, want: true}, {text: "With this report.", kind: text, want: true}, {text: "the farm's own herd", kind: text, want: true},
		{text: "No competing interests exist.", kind: text, want: true}, {text: "initial and final body mass", kind: text, want: true},
		{text: "How barley is processed may change milk yield.", kind: sentence, want: true}, {text: "猪在同一舍内饲养", kind: text, want: true}, {text: "猪猪", kind: text},
		{text: "الخنازير من قطيع المزرعة", kind: text, want: true},
	} {
		if got := adequate(tt.text, tt.kind); got != tt.want {
			t.Errorf("%q %+v: %v, want %v", tt.text, tt.kind, got, tt.want)
		}
	}
}

// Everything that the rows ask to be worked out is, and the values of every key that is
// looked at are found: with all of them stated each part has something to say.
func TestEveryPartIsKnown(t *testing.T) {
	for _, source := range []string{stateAll, strings.Replace(stateAll, "species = \"pig\"", "species = \"mouse\"", 1), stateField} {
		x, list := trial.Open(folder.FromFS(fstest.MapFS{"protocol.toml": {Data: []byte(source)}, "intro.md": {Data: []byte("# Introduction\n\nYeast is cheap on this farm, {{value \"adg\"}} it seems.\n")}}))
		if list.HasErrors() {
			t.Fatal(list)
		}
		rs := &result.Results{Program: result.Program{Name: "penwright", Version: "1"}}
		v := &evidence{t: x, p: x.Protocol, rs: rs}
		for _, g := range welfare.Guidelines(x.Protocol) {
			for _, item := range g.Items {
				for i := range item.Parts {
					part := &item.Parts[i]
					if part.Computed != "" && computed[part.Computed] == nil {
						t.Errorf("%s %s: %q is not worked out", g.Name, item.Number, part.Computed)
						continue
					}
					if part.Computed == "" && part.Sections == nil {
						for _, k := range part.Keys {
							values, known := v.stated(k.Name)
							if !known || len(values) == 0 || values[0].text == "" && !values[0].unseen {
								t.Errorf("%s %s: nothing is found under %s", g.Name, item.Number, k.Name)
							}
						}
					}
					if p := v.part(part); p.State == Missing && part.Sections == nil && !part.Optional {
						t.Errorf("%s %s: %s is missing though stated: %+v", g.Name, item.Number, part.What, p)
					}
				}
			}
		}
	}
}

// A text that is taken out is missed, and so is one that says nothing.
func TestTakenOut(t *testing.T) {
	for _, tt := range []struct{ old, now, item, what, says string }{
		{old: "sex = \"barrow\"", now: "", item: "8a", what: "sex"},
		{old: "sex = \"barrow\"", now: "sex = \"n/a\"", item: "8a", what: "sex", says: "“n/a” says too little"},
		{old: "interests = \"The authors declare no competing interests.\"", now: "interests = \"none\"", item: "21a", what: "interests", says: "“none” says too little"},
		{old: "why = \"initial and final body mass\"", now: "why = \"as usual\"", item: "9d", what: "why each procedure", says: "for weighing"},
		{old: "volume = { value = 8, unit = \"mL\" }", now: "", item: "9a", what: "procedures by name", says: "the volume of jugular sample"},
		{old: "times = 4", now: "", item: "9b", what: "when and how often", says: "for jugular sample"},
		{old: "sd = 24", now: "", item: "2b", what: "what the calculation took", says: "the standard deviation"},
		{old: "analgesia = \"meloxicam before and after\"", now: "", item: "16a", what: "pain relief where tissue is cut", says: "for hernia repair"},
		{old: "basis = \"initial body mass\"", now: "", item: "4b", what: "what was balanced or blocked", says: "what units of one block have in common"},
		{old: "number = \"HARC 26-03\"", now: "number = \"tbd\"", item: "14", what: "number"},
		{old: "funding = \"Hollowmere research farm; it had no part in design, analysis or report.\"", now: "funding = \"Hollowmere research farm\"", item: "21b", what: "their part"},
		{old: "conduct = \"masked\"", now: "", item: "5", what: "during conduct"},
		{old: "role = \"primary\"", now: "role = \"secondary\"", item: "6b", what: "primary outcome"},
		{old: "control = 0", now: "", item: "1a", what: "control, or why there is none"},
		{old: "animals = 6", now: "", item: "2a", what: "animals in all"},
		{old: "how = \"gain of the pen over its animal days\"", now: "how = \"gain\"", item: "6a", what: "what was measured and how", says: "for daily gain"},
	} {
		if strings.Count(stateAll, tt.old) != 1 {
			t.Fatalf("%q stands %d times", tt.old, strings.Count(stateAll, tt.old))
		}
		x, list := trial.Open(folder.FromFS(fstest.MapFS{"protocol.toml": {Data: []byte(strings.Replace(stateAll, tt.old, tt.now, 1))}, "intro.md": {Data: []byte("Yeast is cheap on this farm, it seems.\n")}}))
		if list.HasErrors() {
			t.Fatal(list)
		}
		found := false
		for _, c := range Checklists(x, &result.Results{}, true) {
			for i := range c.Items {
				item := &c.Items[i]
				if c.Name != "ARRIVE 2.0" || item.Number != tt.item {
					continue
				}
				if s := item.State(); s != Missing && s != Partly {
					t.Errorf("%s without %q is %s", tt.item, tt.old, s)
				}
				at := slices.IndexFunc(item.Parts, func(p Part) bool { return p.What == tt.what })
				p := &item.Parts[at]
				found = true
				if p.State == Answered && len(p.Lacks) == 0 {
					t.Errorf("%s: %s is answered without %q", tt.item, tt.what, tt.old)
				}
				if said := p.Says + "; " + strings.Join(p.Lacks, "; "); !strings.Contains(said, tt.says) {
					t.Errorf("%s: %s says %q, want %q", tt.item, tt.what, said, tt.says)
				}
			}
		}
		if !found {
			t.Errorf("there is no item %s", tt.item)
		}
	}
}

// Counts come from the allotment where there is one, else from the plan.
func TestReplication(t *testing.T) {
	for _, tt := range []struct{ unit, want string }{
		{unit: "count = 6\nreceives = [\"mash\"]", want: "6 pens, 3 in each of 2 groups of mash"},
		{unit: "count = 7\nreceives = [\"mash\"]\nreplicates = { fine = 5, coarse = 2 }", want: "7 pens: mash fine 5, mash coarse 2"},
	} {
		source := "protocol = 1\n[trial]\ncode = \"HM-1\"\ntitle = \"Mash\"\nobjective = \"Does it matter?\"\n[[factor]]\nname = \"mash\"\nlevels = [\"fine\", \"coarse\"]\n[[unit]]\nname = \"pen\"\n" + tt.unit + "\n"
		x, list := trial.Open(folder.FromFS(fstest.MapFS{"protocol.toml": {Data: []byte(source)}}))
		if list.HasErrors() {
			t.Fatal(list)
		}
		var out Part
		(&evidence{t: x, p: x.Protocol}).replication(&out)
		if out.Says != tt.want {
			t.Errorf("%q, want %q", out.Says, tt.want)
		}
	}
}

// Sixty treatments of long names make no cell endless.
func TestManyGroups(t *testing.T) {
	var levels []string
	for i := range 60 {
		levels = append(levels, fmt.Sprintf("%q", fmt.Sprintf("line %d %s", i, strings.Repeat("ﬁﬁ אב 猪 ", 30)+"x")))
	}
	source := "protocol = 1\n[trial]\ncode = \"HM-1\"\ntitle = \"Mash\"\nobjective = \"Does it matter?\"\n[[factor]]\nname = \"line\"\nlevels = [" + strings.Join(levels, ", ") + "]\n[[unit]]\nname = \"pen\"\ncount = 61\nreceives = [\"line\"]\n"
	x, list := trial.Open(folder.FromFS(fstest.MapFS{"protocol.toml": {Data: []byte(source)}}))
	if list.HasErrors() {
		t.Fatal(list)
	}
	for _, c := range Checklists(x, &result.Results{}, false) {
		for _, item := range c.Items {
			for _, p := range item.Parts {
				if n := len([]rune(p.Says)); n > 400 {
					t.Errorf("%s %s says %d signs: %s", c.Name, item.Number, n, p.Says)
				}
			}
		}
	}
}

const stateAll = `protocol = 1
[trial]
code = "HM-26-014"
title = "Graded dried yeast"
background = "Dried yeast is at hand on the farm at little cost."
species_rationale = "The question is about growing pigs and no other species."
objective = "Does daily gain rise with dried yeast?"
hypotheses = ["Daily gain rises linearly with yeast."]
site = "Hollowmere research farm, unit 3"
start = 2026-03-02
end = 2026-04-27
registration = "none: internal trial"
funding = "Hollowmere research farm; it had no part in design, analysis or report."
interests = "The authors declare no competing interests."
data_access = "With this report: every file rides inside it."
[[person]]
name = "Ansa Verrill"
role = "stockperson who enrolled and assigned animals"
[approval]
body = "Animal research committee of Hollowmere"
number = "HARC 26-03"
[animals]
species = "pig"
breed = "white landrace cross"
sex = "barrow"
source = "the farm's own herd"
health = "clinically healthy at allotment"
genotype = "not genetically modified in any way"
previous_use = "no procedure before this trial"
age = { from = 63, to = 70, unit = "d" }
mass = { from = 22, to = 32, unit = "kg" }
acclimatization = { value = 7, unit = "d" }
[site]
name = "Hollowmere unit three"
[eligibility]
include = ["clinically healthy at allotment", "pens with a working feeder"]
exclude = ["body mass outside 22-32 kg"]
exclusion_rules = ["humane endpoint reached"]
[housing]
group_size = 6
floor_area = { value = 0.9, unit = "m2" }
temperature = { from = 20, to = 24, unit = "Cel" }
lighting = "08:00 to 20:00"
bedding = "chopped straw"
enrichment = "straw rack"
feed = "ad libitum"
water = "ad libitum"
[welfare]
humane_endpoints = ["loss of more than 10 % of body mass"]
rescue = "The veterinarian treats or withdraws the animal."
refinement = "Animals stay in stable groups."
monitoring = { times_per_day = 2 }
[[welfare.procedure]]
kind = "other"
name = "weighing"
times = 2
how = "group scale with solid sides"
where = "passage beside the pens"
why = "initial and final body mass"
[[welfare.procedure]]
kind = "blood sample"
name = "jugular sample"
volume = { value = 8, unit = "mL" }
route = "jugular vein"
times = 4
how = "in a sling, by a trained person"
where = "in the home pen"
why = "urea in plasma is an outcome"
[[welfare.procedure]]
kind = "surgery"
name = "hernia repair"
times = 1
how = "by the attending veterinarian in the clinic"
where = "in the farm clinic"
why = "for the animal's own health"
analgesia = "meloxicam before and after"
[[welfare.procedure]]
kind = "challenge"
name = "oral challenge"
route = "by stomach tube"
times = 1
how = "a field isolate of known titre in milk"
where = "in the home pen"
why = "the diet may change the course"
[[factor]]
name = "yeast"
label = "Dried yeast"
unit = "g/kg"
levels = [0, 20, 40, 60]
control = 0
[[unit]]
name = "block"
count = 5
basis = "initial body mass"
[[unit]]
name = "pen"
within = "block"
count = 4
animals = 6
receives = ["yeast"]
[randomization]
seed = "HM-26-014/1"
codes = true
by = "Imre Salloway"
method = "drawn by this program within blocks"
[blinding]
allocation = "masked"
conduct = "masked"
assessment = "masked"
analysis = "open"
[sample_size]
basis = "power"
response = "adg"
difference = 60
sd = 24
power = 0.8
source = "previous trial HM-24-002"
[[response]]
name = "adg"
label = "Daily gain"
unit = "g/d"
role = "primary"
kind = "continuous"
how = "gain of the pen over its animal days"
instrument = "group scale"
covariates = ["initial"]
[[covariate]]
name = "initial"
unit = "kg"
[analysis]
assumptions = "Residual pictures are looked at."
[[signature]]
who = "Ansa Verrill"
meaning = "approved the plan"
on = 2026-02-18
[report]
narrative = { introduction = "intro.md" }
`

const stateField = `protocol = 1
[trial]
code = "HM-25-F03"
title = "Nitrogen for spring barley"
background = "Whether barley needs more nitrogen at Hollowmere was not known."
objective = "Does yield rise with nitrogen?"
hypotheses = ["Yield rises with nitrogen."]
site = "Hollowmere research farm, Long Field"
start = 2025-03-20
end = 2025-08-12
registration = "none: internal trial"
funding = "Hollowmere research farm"
interests = "No competing interests exist."
data_access = "With this report."
[material]
crop = "barley"
variety = "one variety"
seed_rate = "320 seeds/m2"
source = "farm-saved"
[site]
name = "Long Field at Hollowmere"
latitude = 52.1
longitude = -1.4
soil = "sandy loam over clay"
season = "2025"
previous_crop = "wheat"
weather = "dry April, wet June"
[plot]
length = { value = 12, unit = "m" }
width = { value = 3, unit = "m" }
net_area = { value = 20, unit = "m2" }
border = { value = 0.5, unit = "m" }
[[input]]
on = 2025-05-14
what = "herbicide"
rate = "1.5 L/ha"
[[factor]]
name = "nitrogen"
unit = "kg/ha"
levels = [0, 40, 80]
control = 0
[[unit]]
name = "block"
count = 4
basis = "slope of the field"
[[unit]]
name = "plot"
within = "block"
count = 3
receives = ["nitrogen"]
[randomization]
method = "drawn by hand within blocks"
[sample_size]
basis = "error df"
source = "four blocks fit the field"
[[response]]
name = "grain_yield"
unit = "t/ha"
role = "primary"
kind = "continuous"
how = "plot combine, to 85 % dry matter"
[analysis]
assumptions = "Residual pictures are looked at."
[report]
narrative = { introduction = "intro.md" }
`
