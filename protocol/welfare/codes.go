package welfare

import (
	_ "embed"

	"penwright/protocol/diag"
)

// The codes of findings. Each example is the part of a file that brings the code about,
// beside [animals] with a species where it gives none.
const (
	// NotCompared: something was not compared with the tables, and why.
	//
	// Example:
	//
	//	[animals]
	//	species = "axolotl"
	NotCompared = "welfare-not-compared"

	// Aim: it is not stated which tables of space serve the trial.
	//
	// Example:
	//
	//	[animals]
	//	species = "pig"
	//	[welfare]
	//	fate = "returned to the herd"
	Aim = "welfare-aim"

	// Approval: an approval is missing, has no number, or lasts too long.
	//
	// Example:
	//
	//	[animals]
	//	species = "pig"
	Approval = "welfare-approval"

	// Severity: the class of severity is missing or below what the procedures indicate.
	//
	// Example:
	//
	//	[approval]
	//	severity = "mild"
	//	[[welfare.procedure]]
	//	kind = "surgery"
	Severity = "welfare-severity"

	// ThreeRs: replacement, reduction or refinement is not stated.
	//
	// Example:
	//
	//	[welfare]
	//	replacement = "No culture grows."
	ThreeRs = "welfare-three-rs"

	// Space: the floor of one animal beside the tables of space.
	//
	// Example:
	//
	//	[animals]
	//	species = "pig"
	//	mass_end = { value = 77, unit = "kg" }
	//	[housing]
	//	floor_area = { value = 0.4, unit = "m2" }
	//	[welfare]
	//	aim = "commercial conditions"
	Space = "welfare-space"

	// Enclosure: the floor of the whole group beside the tables of space.
	//
	// Example:
	//
	//	[animals]
	//	species = "mouse"
	//	mass_end = { value = 24, unit = "g" }
	//	[housing]
	//	group_size = 3
	//	floor_area = { value = 90, unit = "cm2" }
	//	[welfare]
	//	aim = "laboratory"
	Enclosure = "welfare-enclosure"

	// Group: animals live singly without a reason, or groups are not as stated.
	//
	// Example:
	//
	//	[animals]
	//	species = "sheep"
	//	[housing]
	//	group_size = 1
	Group = "welfare-group"

	// Housing: light or enrichment.
	//
	// Example:
	//
	//	[animals]
	//	species = "pig"
	//	[housing]
	//	lighting = "20 lx all day"
	Housing = "welfare-housing"

	// Temperature: the temperature beside the tables.
	//
	// Example:
	//
	//	[trial]
	//	start = 2027-01-04
	//	[animals]
	//	species = "zebrafish"
	//	[housing]
	//	temperature = { value = 22, unit = "Cel" }
	Temperature = "welfare-temperature"

	// Water: water is not free, or nothing is said of it.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "water restriction"
	Water = "welfare-water"

	// Fish: the quality of water for fish.
	//
	// Example:
	//
	//	[animals]
	//	species = "rainbow trout"
	Fish = "welfare-fish"

	// Acclimatization: no time of acclimatization is stated.
	//
	// Example:
	//
	//	[animals]
	//	species = "pig"
	Acclimatization = "welfare-acclimatization"

	// Young: what holds for calves and piglets.
	//
	// Example:
	//
	//	[animals]
	//	species = "calf"
	Young = "welfare-young"

	// Monitoring: how often the animals are looked at.
	//
	// Example:
	//
	//	[welfare]
	//	monitoring = { times_per_day = 0.5, by = "stockperson" }
	Monitoring = "welfare-monitoring"

	// Endpoints: humane endpoints are missing, or speak of death.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "challenge"
	Endpoints = "welfare-endpoints"

	// MassLoss: the loss of body mass that an endpoint allows.
	//
	// Example:
	//
	//	[welfare]
	//	humane_endpoints = ["loss of more than 25 % of body mass"]
	MassLoss = "welfare-mass-loss"

	// Blood: the blood drawn beside the limits, single and repeated.
	//
	// Example:
	//
	//	[animals]
	//	species = "mouse"
	//	mass = { value = 20, unit = "g" }
	//	[[welfare.procedure]]
	//	kind = "blood sample"
	//	volume = { value = 0.2, unit = "mL" }
	Blood = "welfare-blood"

	// Dose: the volume given beside the limits of the route.
	//
	// Example:
	//
	//	[animals]
	//	species = "mouse"
	//	mass = { value = 20, unit = "g" }
	//	[[welfare.procedure]]
	//	kind = "gavage"
	//	volume = { value = 0.5, unit = "mL" }
	Dose = "welfare-dose"

	// Fasting: feed is off longer than a limit, or without reason or duration.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "fasting"
	//	duration = { value = 24, unit = "h" }
	Fasting = "welfare-fasting"

	// Single: animals are kept singly.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "single housing"
	Single = "welfare-single-housing"

	// Restraint: animals are restrained.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "restraint"
	Restraint = "welfare-restraint"

	// Pain: surgery, marking or a terminal draw without pain relief.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "surgery"
	//	anaesthesia = "none"
	Pain = "welfare-pain"

	// Transport: animals are transported.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "transport"
	Transport = "welfare-transport"

	// Challenge: animals are challenged without rescue or endpoints.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "challenge"
	Challenge = "welfare-challenge"

	// Diet: the diet is deficient and there is no rescue or endpoint.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "deficient diet"
	Diet = "welfare-diet"

	// Reuse: the animals were used before.
	//
	// Example:
	//
	//	[animals]
	//	species = "sheep"
	//	previous_use = "a digestion trial"
	Reuse = "welfare-reuse"

	// Staff: the safety of staff.
	//
	// Example:
	//
	//	[[welfare.procedure]]
	//	kind = "challenge"
	Staff = "welfare-staff"

	// Residues: the food chain and withdrawal periods.
	//
	// Example:
	//
	//	[animals]
	//	species = "pig"
	//	food_chain = true
	Residues = "welfare-residues"

	// Fate: what becomes of the animals.
	//
	// Example:
	//
	//	[animals]
	//	species = "sheep"
	Fate = "welfare-fate"

	// Killing: animals are killed and nothing is said of how.
	//
	// Example:
	//
	//	[welfare]
	//	fate = "killed for dissection"
	Killing = "welfare-killing"

	// Records: how long records are kept.
	//
	// Example:
	//
	//	[trial]
	//	end = 2026-05-01
	//	[animals]
	//	species = "pig"
	//	[records]
	//	retain_until = 2027-05-01
	Records = "welfare-records"
)

// The examples of the codes stand in their comments.
//
//go:embed codes.go
var codesFile string

// Codes describes the codes of findings, in the order of the constants.
func Codes() []diag.CodeInfo {
	return diag.WithExamples([]diag.CodeInfo{
		{Code: NotCompared, Text: "something was not compared with the tables, and why"},
		{Code: Aim, Text: "it is not stated which tables of space serve the trial"},
		{Code: Approval, Text: "an approval is missing, has no number, or lasts too long"},
		{Code: Severity, Text: "the class of severity is missing or below what the procedures indicate"},
		{Code: ThreeRs, Text: "replacement, reduction or refinement is not stated"},
		{Code: Space, Text: "the floor of one animal beside the tables of space"},
		{Code: Enclosure, Text: "the floor of the whole group beside the tables of space"},
		{Code: Group, Text: "animals live singly without a reason, or groups are not as stated"},
		{Code: Housing, Text: "light or enrichment"},
		{Code: Temperature, Text: "the temperature beside the tables"},
		{Code: Water, Text: "water is not free, or nothing is said of it"},
		{Code: Fish, Text: "the quality of water for fish"},
		{Code: Acclimatization, Text: "no time of acclimatization is stated"},
		{Code: Young, Text: "what holds for calves and piglets"},
		{Code: Monitoring, Text: "how often the animals are looked at"},
		{Code: Endpoints, Text: "humane endpoints are missing, or speak of death"},
		{Code: MassLoss, Text: "the loss of body mass that an endpoint allows"},
		{Code: Blood, Text: "the blood drawn beside the limits, single and repeated"},
		{Code: Dose, Text: "the volume given beside the limits of the route"},
		{Code: Fasting, Text: "feed is off longer than a limit, or without reason or duration"},
		{Code: Single, Text: "animals are kept singly"},
		{Code: Restraint, Text: "animals are restrained"},
		{Code: Pain, Text: "surgery, marking or a terminal draw without pain relief"},
		{Code: Transport, Text: "animals are transported"},
		{Code: Challenge, Text: "animals are challenged without rescue or endpoints"},
		{Code: Diet, Text: "the diet is deficient and there is no rescue or endpoint"},
		{Code: Reuse, Text: "the animals were used before"},
		{Code: Staff, Text: "the safety of staff"},
		{Code: Residues, Text: "the food chain and withdrawal periods"},
		{Code: Fate, Text: "what becomes of the animals"},
		{Code: Killing, Text: "animals are killed and nothing is said of how"},
		{Code: Records, Text: "how long records are kept"},
	}, codesFile)
}
