package sheet

import (
	_ "embed"
	"encoding/json"
	"reflect"
	"strings"
)

// SchemaJSON is the JSON Schema (draft 2020-12) of the entries, as it stands in
// the repository beside this file and as Schema makes it.
//
//go:embed schema.json
var SchemaJSON []byte

// record ties a kind of entry, and a name where the kind holds several forms, to
// its form.
type record struct {
	kind Kind
	name string // "" for every other name of the kind
	form reflect.Type
}

var records = []record{
	{KindHeader, "", reflect.TypeFor[Header]()},
	{KindRig, NameNameplate, reflect.TypeFor[NameplateRecord]()},
	{KindJob, NameOutcome, reflect.TypeFor[OrderRecord]()},
	{KindPart, "", reflect.TypeFor[PartRecord]()},
	{KindAsFound, "", reflect.TypeFor[Snapshot]()},
	{KindAsLeft, "", reflect.TypeFor[Snapshot]()},
	{KindCheck, "", reflect.TypeFor[CheckRecord]()},
	{KindInterlock, "", reflect.TypeFor[InterlockRecord]()},
	{KindEvent, NameRunUp, reflect.TypeFor[RunUpRecord]()},
	{KindEvent, NameAcceptance, reflect.TypeFor[AcceptanceRecord]()},
	{KindEvent, NameDrill, reflect.TypeFor[DrillRecord]()},
	{KindEvent, NameChecklist, reflect.TypeFor[ChecklistRecord]()},
	{KindEvent, NameWhyStopped, reflect.TypeFor[WhyStoppedRecord]()},
	{KindRun, "", reflect.TypeFor[RunRecord]()},
	{KindFit, "", reflect.TypeFor[FitRecord]()},
	{KindFit, NameStaircase, reflect.TypeFor[StaircaseRecord]()},
	{KindFit, NameBreakaway, reflect.TypeFor[BreakawayRecord]()},
	{KindFit, NameMotor, reflect.TypeFor[MotorRecord]()},
	{KindExperiment, "", reflect.TypeFor[ExperimentRecord]()},
	{KindProposal, "", reflect.TypeFor[ProposalRecord]()},
	{KindPush, "", reflect.TypeFor[PushRecord]()},
	{KindVerify, "", reflect.TypeFor[VerifyRecord]()},
	{KindStore, "", reflect.TypeFor[StoreRecord]()},
	{KindEvent, "", reflect.TypeFor[EventRecord]()},
	{KindClose, "", reflect.TypeFor[Closing]()},
}

// formOf returns the form that an entry must have, nil where it is free.
func formOf(kind Kind, name string) reflect.Type {
	var general reflect.Type
	for _, r := range records {
		if r.kind == kind && r.name == name {
			return r.form
		}
		if r.kind == kind && r.name == "" {
			general = r.form
		}
	}
	return general
}

// Schema makes the schema from the records' own declarations: one definition
// for each form, and under "entries" which file holds which.
func Schema() ([]byte, error) {
	defs := map[string]any{}
	entries := map[string]any{}
	for _, r := range records {
		file := string(r.kind) + "-*.json"
		if r.name != "" {
			file = string(r.kind) + "-" + r.name + ".json"
		}
		entries[file] = schemaOf(r.form, defs)
	}
	return encode(map[string]any{
		"$schema":     "https://json-schema.org/draft/2020-12/schema",
		"title":       "Entries of a gainwright sheet, format 1",
		"description": "entries maps the part of a file's name after its number to its form. Keys name their units; null is not known.",
		"$defs":       defs,
		"entries":     entries,
	})
}

func schemaOf(t reflect.Type, defs map[string]any) map[string]any {
	if t == reflect.TypeFor[json.RawMessage]() {
		return map[string]any{"description": "in the fixed form of its own package, or null"}
	}
	switch t.Kind() {
	case reflect.String:
		return map[string]any{"type": "string"}
	case reflect.Bool:
		return map[string]any{"type": "boolean"}
	case reflect.Int, reflect.Int64, reflect.Uint64:
		return map[string]any{"type": "integer"}
	case reflect.Float64:
		return map[string]any{"type": "number"}
	case reflect.Pointer:
		return orNull(schemaOf(t.Elem(), defs))
	case reflect.Slice:
		return map[string]any{"type": []string{"array", "null"}, "items": schemaOf(t.Elem(), defs)}
	case reflect.Map:
		return map[string]any{"type": []string{"object", "null"}, "additionalProperties": schemaOf(t.Elem(), defs)}
	}
	if _, known := defs[t.Name()]; !known {
		defs[t.Name()] = nil // before the fields, in case a form holds itself
		defs[t.Name()] = objectSchema(t, defs)
	}
	return map[string]any{"$ref": "#/$defs/" + t.Name()}
}

func objectSchema(t reflect.Type, defs map[string]any) map[string]any {
	properties := map[string]any{}
	required := []string{}
	for i := range t.NumField() {
		f := t.Field(i)
		tag, options, _ := strings.Cut(f.Tag.Get("json"), ",")
		properties[tag] = schemaOf(f.Type, defs)
		if options == "string" {
			properties[tag] = map[string]any{"type": "string", "pattern": "^[0-9]+$"}
		}
		if options != "omitempty" {
			required = append(required, tag)
		}
	}
	return map[string]any{"type": "object", "properties": properties, "required": required}
}

func orNull(s map[string]any) map[string]any {
	if kind, ok := s["type"].(string); ok {
		s["type"] = []string{kind, "null"}
		return s
	}
	return map[string]any{"anyOf": []any{s, map[string]any{"type": "null"}}}
}
