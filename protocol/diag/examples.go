package diag

import "strings"

// WithExamples adds to codes the examples that stand in the comments of their constants.
// source is the text of the Go file that declares them; a comment ends with either
//
//	// Example:
//	//
//	//	[trial]
//	//	cod = "HM-26-014"
//
// or, where words say it better, one line of them: Example: a file of no bytes.
func WithExamples(codes []CodeInfo, source string) []CodeInfo {
	out := make([]CodeInfo, len(codes))
	examples := map[string]string{}
	var comment []string
	for _, line := range strings.Split(source, "\n") {
		line = strings.TrimSpace(line)
		if text, ok := strings.CutPrefix(line, "//"); ok {
			comment = append(comment, text)
			continue
		}
		if name, value, ok := strings.Cut(line, " = \""); ok && !strings.Contains(name, " ") && strings.HasSuffix(value, `"`) {
			examples[strings.TrimSuffix(value, `"`)] = exampleIn(comment)
		}
		comment = nil
	}
	for i, c := range codes {
		c.Example = examples[c.Code]
		out[i] = c
	}
	return out
}

// exampleIn is the example in the lines of a comment, without their strokes.
func exampleIn(comment []string) string {
	for i, line := range comment {
		after, ok := strings.CutPrefix(strings.TrimSpace(line), "Example:")
		if !ok {
			continue
		}
		text := []string{strings.TrimSpace(after)}
		for _, l := range comment[i+1:] {
			text = append(text, strings.TrimPrefix(strings.TrimPrefix(l, " "), "\t"))
		}
		return strings.Trim(strings.Join(text, "\n"), "\n")
	}
	return ""
}
