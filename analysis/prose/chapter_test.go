package prose

import (
	"testing"

	"penwright/protocol"
)

func TestPhrases(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{got: phrase(" body mass\n outside 22-32 kg. "), want: "body mass outside 22–32 kg"},
		{got: phrase("trial HM-26-014 of 2026-03-02"), want: "trial HM-26-014 of 2026-03-02"},
		{got: phrase("320 seeds/m2, the farm's own"), want: "320 seeds/m², the farm’s own"},
		{got: phrase("5\u202f% of the mean."), want: "5\u202f% of the mean"},
		{got: finished("pH rose by 0.1"), want: "pH rose by 0.1."},
		{got: finished("was it so?"), want: "Was it so?"},
		{got: finished(" . "), want: ""},
		{got: series([]string{"a", "b", "c"}), want: "a, b and c"},
		{got: series([]string{"fish", "half and half"}), want: "fish; and half and half"},
		{got: series([]string{"gain (g/d; by scale, twice)", "intake (kg/d)"}), want: "gain (g/d; by scale, twice) and intake (kg/d)"},
		{got: definite("feed mill office"), want: "the feed mill office"},
		{got: definite("Rosa Tindle"), want: "Rosa Tindle"},
		{got: definite("each keeper"), want: "each keeper"},
		{got: article("augmented block"), want: "an augmented block"},
		{got: article("split plot"), want: "a split plot"},
		{got: fromTo(protocol.Date{Year: 2026, Month: 3, Day: 2}, protocol.Date{Year: 2026, Month: 4, Day: 27}), want: "from 2\u00a0March to 27\u00a0April\u00a02026"},
		{got: fromTo(protocol.Date{Year: 2025, Month: 12, Day: 2}, protocol.Date{Year: 2026, Month: 1, Day: 7}), want: "from 2\u00a0December\u00a02025 to 7\u00a0January\u00a02026"},
		{got: fromTo(protocol.Date{}, protocol.Date{Year: 2026, Month: 1, Day: 7}), want: "until 7\u00a0January\u00a02026"},
		{got: speciesPlural("rainbow trout"), want: "rainbow trout"},
		{got: speciesPlural("broiler chicken"), want: "broiler chickens"},
		{got: speciesPlural("house mouse"), want: "house mice"},
		{got: speciesPlural("Sus scrofa"), want: "animals"},
		{got: singularUnit("seeds/m²"), want: "seed/m²"},
		{got: singularUnit("kg/ha"), want: "kg/ha"},
		{got: formula("(final_mass - initial_mass) / animal_days * 1000"), want: "(final mass − initial mass) / animal days × 1000"},
		{got: upperFirst("pH after 30 days"), want: "pH after 30 days"},
		{got: upperFirst("élevage"), want: "Élevage"},
		{got: offered("water", "ad libitum, two bowls", true), want: "water was offered ad libitum (two bowls)"},
		{got: offered("feed", "mixed ration at a trough", false), want: "the feed will consist of mixed ration at a trough"},
	} {
		if c.got != c.want {
			t.Errorf("%q, want %q", c.got, c.want)
		}
	}
}

// Words alone, from any keyboard, make no phrase that breaks a sentence.
func FuzzPhrase(f *testing.F) {
	f.Add("a. b; c,\n")
	f.Add("(1-2) (3")
	f.Fuzz(func(t *testing.T, s string) {
		for _, x := range []string{phrase(s), finished(s), series(phrases([]string{s, s})), definite(s), inner(s), offered("feed", s, true), speciesPlural(s), formula(s)} {
			for _, r := range x {
				if r == '\n' || r == '\r' || r == '\t' {
					t.Fatalf("%q", x)
				}
			}
		}
	})
}
