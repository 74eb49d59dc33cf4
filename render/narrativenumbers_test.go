package render

import (
	"fmt"
	"strings"
	"testing"

	"penwright/render/compose"
)

// readerOf makes a reader of prose about a trial of the tests.
func readerOf(t *testing.T, name string) *reader {
	t.Helper()
	x, rs, _ := opened(t, trials(t)[name])
	b := &builder{pictures: pictures{trial: x, rs: rs}, options: fixed}
	b.functions()
	return b.newReader()
}

// Prose as authors write it about the built-in trial. What stands in [[…]] contradicts
// the results and must be warned of; nothing else may be.
var paragraphsOfAuthors = map[string][]string{"demo": {
	// What is right.
	"Average daily gain was 863 g/d without yeast and 900 g/d at 40 g/kg of yeast.",
	"Daily gain averaged 863, 867, 900 and 891 g/d at 0, 20, 40 and 60 g/kg.",
	"Gain rose by 37 g/d, or 4.3 %, from 0 to 40 g/kg (P = 0.032).",
	"Gain rose by 0.59 g/d for each g/kg of yeast (P = 0.007; 95 % limits 0.20 to 0.98).",
	"Gain was 900 g per day at 40 g/kg and 891.4 g a day at 60 g/kg.",
	"The SED of gain was 11 g/d and its SE 8.1 g/d; the CV was 2.0 %.",
	"Intake was about 2.2 kg/d on all diets (P = 0.66), backfat depth 13.3 mm on average.",
	"Daily gain differed between diets, F(3, 12) = 5.08, P = 0.017.",
	"The difference in gain between 20 and 0 g/kg was 3.6 g/d, not to be told from none (P = 0.99).",
	"Gain changed by −28 g/d from 60 to 0 g/kg.",
	"Backfat had SD 1.1 mm at 20 g/kg. Intake was 2.19 kg/d at 20 g/kg.",
	"Gain was nearly 870 g/d at 20 g/kg.",
	"The heaviest gain of a pen was 939 g/d.",
	"Mean gain was 880 g/d.",
	"Gain reached 900 g d⁻¹ at 40 g/kg and 866.7 g d-1 at 20 g/kg.",
	// Numbers that quote no result.
	"On 14 March 2026 one barrow left pen 15; its gain up to day 12 counts.",
	"Gain was measured in 20 pens of 6 animals over 56 days, from 2026-03-02 to 2026-04-27.",
	"Animals of 22-32 kg gained weight in blocks 1 to 5; Table 24 and Figure 5 show their gain.",
	"Yeast at 20, 40 and 60 g/kg replaced soybean meal, and gain was recorded twice.",
	"Dried yeast held 452 g/kg of crude protein; gain and intake were taken per pen.",
	"Verrill et al. (2019) found a gain of 812 g/d with 30 g/kg of yeast.",
	"A gain of 812 g/d was reported by others[^1].",
	"The trial was planned to detect a gain of 60 g/d with a power of 0.80.",
	"Gain would have to be 950 g/d to pay for the yeast.",
	"The level of significance was 5 %, and limits of gain are 95 % limits.",
	"Feed for 1 kg of gain cost 0.31 in 2026, against 0.29 in 2025.",
	"Gain was taken to the nearest 10 g/d.",
	"Temperature in unit 3 was 20 to 24 °C while gain was recorded at 08:00.",
	"Gain exceeded 850 g/d in all groups.",
	"The code HM-26-014 and P4 stand in the record of gain.",
	"At 2.5 % of the diet yeast is dear; gain did not pay for it.",
	"Gain was computed from 1,250 weighings with scale no. 2 (accuracy 0.5 kg).",
	"`gain 500 g/d` is how it is written in the record of gain.",
	"[the farm's record of gain](https://example.org/900) tells more of gain.",
	"Average daily gain was {{mean \"adg\" \"yeast\" \"0\"}} and rose ({{p \"adg\" \"yeast: linear\"}}).",
	"Initial backfat depth was 9.1 mm in all groups.",
	"Gain war 0,59 g/d je g/kg.",
	"Feed mill batches of 400 kg were mixed 3 times; intake was weighed in every 7 d.",
	"The minister said 500 g/d. That is not about a response here.",
	"Gain was highest in 2 of 5 blocks with 40 g/kg.",
	// What is wrong.
	"Average daily gain was [[863]] g/d at 40 g/kg of yeast.",
	"Average daily gain was [[853]] g/d without yeast.",
	"Daily gain averaged 863, [[876]], 900 and 891 g/d at 0, 20, 40 and 60 g/kg.",
	"Gain rose linearly with yeast (P = [[0.02]]; linear trend).",
	"Gain rose with yeast (P < [[0.001]]).",
	"Gain did not change with yeast (P > [[0.995]]).",
	"Gain rose by [[6.3]] % from 0 to 40 g/kg.",
	"Gain was [[9.5]] % higher with yeast.",
	"Gain fell by [[−52]] g/d from 40 to 0 g/kg.",
	"Gain fell by [[52]] g/d.",
	"The effect of yeast on gain was F(3, 12) = [[7.31]].",
	"Gain was [[850]] at 20 g/kg, as one sees.",
	"Daily gain of [[0.93]] g/d for each g/kg of yeast, [[1.71]] g/d at best.",
	"Intake was [[2.41]] kg/d at 60 g/kg.",
	"Backfat depth at the end was [[14.9]] mm with 60 g/kg.",
	"Intake was 2.20 kg/d and gain [[940.5]] g/d.",
	"The SED of gain was [[16]] g/d.",
	"The CV of gain was [[3.7]] %.",
	"Gain reached [[1,900]] g/d.",
	"Gain reached [[920]] g per day at 40 g/kg.",
	"We saw\na gain of\n[[843]] g/d in the\ncontrol.",
	"> Gain was [[700]] g/d.",
	"- Gain was [[700]] g/d.\n- Intake was 2.2 kg/d.",
}, "latin-square": {
	"Milk yield was 28.75 kg/d with whole barley, 29.5 kg/d with rolled, 30.7 with ground and 30.8 kg/d with steamed barley.",
	"Ground barley gave 30.7 kg/d of milk yield, 2.0 kg/d more than whole barley (P < 0.001).",
	"The SED of milk yield was 0.38 to 0.41 kg/d; milk yield rose by 6.9 % from whole to ground barley.",
	"Cows of 560 to 690 kg gave milk yield records in 4 periods of 21 days; 8 kg of barley a day was fed.",
	"Milk yield was [[31.6]] kg/d with rolled barley.",
	"Milk yield was [[30.74]] kg/d with rolled barley.",
	"Milk yield rose by [[2.9]] kg/d with ground barley.",
	"Milk yield rose with rolled barley (P = [[0.018]]).",
}, "split-plot": {
	"Grain yield was 5.56 t/ha at 120 kg/ha of nitrogen and 3.87 t/ha without (P < 0.001).",
	"Grain yield on ploughed plots rose with nitrogen; plots were 12 m by 3 m, of which 20 m2 were harvested, 4 blocks in all.",
	"Grain yield depended on tillage and nitrogen, F(6, 27) = 3.13, interaction P = 0.019.",
	"Grain yield was [[6.31]] t/ha with direct drilling.",
	"Grain yield at 80 kg/ha was [[5.9]] t/ha.",
	"The interaction of tillage and nitrogen in grain yield had P = [[0.23]].",
}}

func TestTypedNumbers(t *testing.T) {
	for name, paragraphs := range paragraphsOfAuthors {
		testTyped(t, readerOf(t, name), paragraphs)
	}
}

func testTyped(t *testing.T, rd *reader, paragraphs []string) {
	t.Helper()
	for _, p := range paragraphs {
		var want []string
		text := p
		for {
			i := strings.Index(text, "[[")
			if i < 0 {
				break
			}
			j := strings.Index(text, "]]")
			want = append(want, fmt.Sprintf("%s %s", placeIn(compose.Source{Name: "t.md", Text: text}, i), text[i+2:j]))
			text = text[:i] + text[i+2:j] + text[j+2:]
		}
		list := rd.typed(compose.Source{Name: "t.md", Text: text})
		var got []string
		for _, d := range list {
			said := strings.Trim(strings.Split(d.Message, " is typed")[0], `"`)
			said = strings.TrimLeft(said, "P<>=≤≥ ")
			number, _, _ := strings.Cut(said, " ")
			got = append(got, d.Pos.String()+" "+number)
		}
		if fmt.Sprint(got) != fmt.Sprint(want) {
			t.Errorf("%s\nwarns of %v, want %v", text, got, want)
			for _, d := range list {
				t.Logf("%s (%s)", d.Message, d.Hint)
			}
		}
	}
}
