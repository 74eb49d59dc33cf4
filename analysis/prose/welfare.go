package prose

import (
	"fmt"
	"strings"

	"penwright/protocol"
	"penwright/protocol/welfare"
)

// Compared sums up the findings on the welfare of animals and defers.
func Compared(found []welfare.Finding) []string {
	if len(found) == 0 {
		return nil
	}
	var n [3]int
	for _, f := range found {
		n[f.Level]++
	}
	s := []string{fmt.Sprintf("What the protocol states was looked at in %s, beside published limits where there are some; where documents differ the strictest of those that apply is compared, and the others are shown.", some(len(found), "point"))}
	switch n[welfare.Warning] {
	case 0:
		s = append(s, "Nothing is outside a limit or missing that a limit asks for.")
	default:
		verb := "are"
		if n[welfare.Warning] == 1 {
			verb = "is"
		}
		s = append(s, fmt.Sprintf("%s %s outside a limit, or lacks what is asked for.", upperFirst(small(n[welfare.Warning])), verb))
	}
	if k := n[welfare.Note]; k == 1 {
		s = append(s, "One is a note: it was not compared, or needs no change.")
	} else if k > 1 {
		s = append(s, fmt.Sprintf("%s are notes: they were not compared, or need no change.", upperFirst(small(k))))
	}
	return append(s, Deference())
}

// Deference is the sentence that ends every caution on animals.
func Deference() string { return upperFirst(welfare.Deference) + "." }

// LookUps introduces what is known from memory alone.
func LookUps(p *protocol.Protocol) []string {
	if len(welfare.LookUp(p)) == 0 {
		return nil
	}
	return []string{"Nothing was compared with the following, because it was not seen in a document (M). Look this up in the official text."}
}

// KeptText says whether the protocol keeps to a limit.
func KeptText(q *welfare.Quoted) string {
	s := "no"
	switch {
	case q.Stated == "":
		return "shown"
	case q.Topic == "circulating volume" || q.Topic == "withdrawal":
		return ""
	case q.Met:
		s = "yes"
	}
	if !q.Applied {
		s += ", shown"
	}
	return s
}

// FindingText is what a comparison came to, as sentences; a caution ends by deferring.
func FindingText(f *welfare.Finding) string {
	s := upperFirst(f.Text) + "."
	if f.Hint != "" && f.Level != welfare.Pass {
		s += " " + upperFirst(f.Hint) + "."
	}
	if f.Level == welfare.Warning {
		s += " The ethics committee, the attending veterinarian and local law decide."
	}
	return s
}

// ReadingText says how a document was read.
func ReadingText(r welfare.Reading, read string) string {
	if r == welfare.SecondHand {
		return strings.TrimSuffix("C2: at second hand; "+read, "; ")
	}
	return strings.TrimSuffix("C: "+read, ": ")
}
