package protocol

import (
	"slices"
	"strings"
)

// The kinds of responses that need keys of their own.
const (
	kindProportion  = "proportion"
	kindTimeToEvent = "time to event"
)

var comparisons = []string{"none", "lsd", "protected lsd", "tukey", "dunnett", "bonferroni", "holm", "sidak", "scheffe",
	"newman-keuls", "duncan"}

func (t *table) response() Response {
	t.need("name", "kind")
	name := t.name()
	r := Response{
		Name:       name,
		Label:      t.labelled(name),
		Unit:       t.str("unit"),
		Role:       t.enum("role", "", "primary", "secondary", "safety"),
		Kind:       t.enum("kind", "", "continuous", "count", kindProportion, "binary", "ordinal", kindTimeToEvent),
		Method:     t.enum("method", "auto", "auto", "ranks"),
		How:        t.str("how"),
		Instrument: t.str("instrument"),
		Assessed:   t.str("assessed"),
		Covariates: t.words("covariates"),
		Transform:  t.enum("transform", "none", "none", "log", "sqrt", "logit", "arcsine", "reciprocal", "box-cox"),
		Offset:     t.number("offset", positive),
		Compute:    t.str("compute"),
		RecordedOn: t.word("recorded_on"),
		Aggregate:  t.enum("aggregate", "", "mean", "sum", "ratio"),
		File:       t.file("file"),
		Over:       t.word("over"),
		Repeated:   t.word("repeated"),
		Total:      t.word("total"),
		Event:      t.word("event"),
		Comparison: t.enum("comparison", "", comparisons...),
		Alpha:      t.number("alpha", proportion),
		Margin:     t.number("margin", notBelow0),
	}
	r.Range = t.limits("range")
	if t.has("decimals") {
		if n := t.whole("decimals", 0, 15, -1); n >= 0 {
			r.Decimals = &n
		}
	} else {
		t.get("decimals")
	}
	if sub, names := t.free("where", "columns and values"); sub != nil {
		for _, n := range names {
			if s := sub.scalar(n); s != "" {
				r.Where = append(r.Where, Condition{Column: n, Value: s})
			}
		}
	}
	each(t, "contrasts", maxLevels, &r.Contrasts, (*table).contrast)

	if s, ok := t.m["compute"].(string); ok && strings.TrimSpace(s) == "" {
		t.fail("compute", BadText, "delete it or write an expression", "the text is empty")
	}
	t.depends("total", "kind", r.Kind, kindProportion)
	t.depends("event", "kind", r.Kind, kindTimeToEvent)
	if r.Aggregate == "ratio" && !t.has("compute") {
		t.fail("aggregate", NeedsKey, `write compute = "feed / gain"`, "a ratio of sums needs compute")
	}
	if t.has("over") && !t.has("aggregate") {
		t.fail("over", NeedsKey, `add aggregate = "mean" or "sum"`, "over says nothing without aggregate")
	}
	if t.has("offset") && (r.Transform == "none" || r.Transform == "arcsine" || r.Transform == "logit") {
		t.fail("offset", Conflict, `delete it, or write transform = "log"`, "an offset has no meaning with transform = %s", quote(r.Transform))
	}
	if r.Kind != "" && r.Kind != "continuous" && r.Kind != "count" && r.Kind != kindProportion && r.Transform != "none" {
		t.fail("transform", Conflict, "delete transform", "a response of kind %s is not transformed", quote(r.Kind))
	}
	if r.Kind == kindTimeToEvent && r.Method == "ranks" {
		t.fail("method", Conflict, "delete method", "times to an event have their own method")
	}
	return r
}

// depends reports a key that one kind needs and all others cannot have.
func (t *table) depends(key, on, is, want string) {
	switch {
	case is == want && !t.has(key):
		t.fail(key, NeedsKey, "name the column: "+key+" = \"…\"", "%s = %s needs %s", on, quote(want), key)
	case is != want && is != "" && t.has(key):
		t.fail(key, Conflict, "delete it, or write "+on+" = "+quote(want), "%s has no meaning with %s = %s", key, on, quote(is))
	}
}

// limits reads two numbers, the smaller first.
func (t *table) limits(key string) *[2]float64 {
	items, ok := t.list(key, "two numbers")
	if !ok {
		return nil
	}
	if len(items) != 2 {
		t.fail(key, WrongType, "write "+key+" = [smallest, largest]", "expected two numbers, found %d", len(items))
		return nil
	}
	var r [2]float64
	for i, v := range items {
		x, why := finite(v)
		if why != "" {
			t.item(key, i, why, "", "expected a number, found %s", found(v))
			return nil
		}
		r[i] = x
	}
	if r[0] >= r[1] {
		t.fail(key, OutOfRange, "write "+key+" = [smallest, largest]", "the range ends at %s, not above its beginning at %s", shortest(r[1]), shortest(r[0]))
		return nil
	}
	return &r
}

func (t *table) contrast() Contrast {
	t.need("name", "factor", "weights")
	c := Contrast{Name: t.word("name"), Factor: t.word("factor")}
	if sub, names := t.free("weights", "weights of levels"); sub != nil {
		for _, n := range names {
			if x := sub.number(n, anyNumber); x != nil {
				c.Weights = append(c.Weights, Weight{Level: n, Value: *x})
			}
		}
	}
	return c
}

// analysis reads [analysis]; on an empty table it gives the defaults.
func (t *table) analysis() Analysis {
	a := Analysis{
		Alpha:             orElse(t.number("alpha", proportion), 0.05),
		Tendency:          orElse(t.number("tendency", below1), 0),
		Comparison:        t.enum("comparison", "tukey", comparisons...),
		Side:              t.enum("side", "two", "two", "greater", "less"),
		Pairs:             t.enum("pairs", "slices", "slices", "all"),
		Letters:           "auto",
		Trend:             t.whole("trend", 0, 10, 3),
		Interactions:      -1,
		Blocks:            t.enum("blocks", "auto", "auto", "fixed", "random"),
		Adjustment:        t.enum("adjustment", "auto", "auto", "marginal", "sequential", "partial"),
		DFMethod:          t.enum("df_method", "kenward-roger", "kenward-roger", "satterthwaite"),
		Components:        t.enum("components", "auto", "auto", "bounded"),
		Limits:            t.enum("limits", "wald", "wald", "profile"),
		VarianceBy:        t.str("variance_by"),
		RandomizationTest: t.whole("randomization_test", 0, 100_000_000, 9999),
		ErrorDFMin:        t.whole("error_df_min", 1, maxCount, 10),
		Margin:            orElse(t.number("margin", notBelow0), 0),
		Assumptions:       t.str("assumptions"),
	}
	if on, isBool := t.m["letters"].(bool); isBool {
		t.get("letters")
		a.Letters = map[bool]string{true: "true", false: "false"}[on]
	} else {
		a.Letters = t.enum("letters", "auto", "auto", "true", "false")
	}
	if _, isText := t.m["interactions"].(string); isText {
		if t.enum("interactions", "auto", "auto", "none") == "none" {
			a.Interactions = 1
		}
	} else {
		a.Interactions = t.whole("interactions", 1, maxFactors, -1)
	}
	if t.has("tendency") && a.Tendency != 0 && a.Tendency <= a.Alpha {
		t.fail("tendency", OutOfRange, "write the greater P up to which a tendency is spoken of, such as 0.10", "the limit of a tendency, %s, is not above alpha, %s", shortest(a.Tendency), shortest(a.Alpha))
	}
	each(t, "contrast", maxLevels, &a.Contrasts, (*table).contrast)
	only(t, "dose_response", &a.DoseResponse, func(t *table) DoseResponse {
		t.need("factor")
		d := DoseResponse{Factor: t.word("factor"), Models: slices.Clone(doseModels)}
		if t.has("models") {
			d.Models = nil
			items, _ := t.list("models", "names of models")
			for i, v := range items {
				m, ok := v.(string)
				switch {
				case !ok:
					t.item("models", i, WrongType, oneOf(doseModels), "expected the name of a model, found %s", found(v))
				case !slices.Contains(doseModels, m):
					t.item("models", i, UnknownValue, t.d.suggest(m, doseModels), "there is no model %s", quote(m))
				case slices.Contains(d.Models, m):
					t.item("models", i, Duplicate, "keep one of them", "%s is listed twice", quote(m))
				default:
					d.Models = append(d.Models, m)
				}
			}
			if len(items) == 0 && t.m["models"] != nil {
				t.fail("models", TooFew, oneOf(doseModels), "no model is named")
			}
		} else {
			t.get("models")
		}
		return d
	})
	return a
}

var doseModels = []string{"linear", "quadratic", "linear plateau", "quadratic plateau", "quadratic optimum", "exponential asymptote"}
