package sheet

import (
	"bytes"
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

func TestSchemaFileIsCurrent(t *testing.T) {
	made, err := Schema()
	if err != nil {
		t.Fatal(err)
	}
	if *update {
		if err := os.WriteFile("schema.json", made, 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	if !bytes.Equal(made, SchemaJSON) {
		t.Error("schema.json is not what the records declare; run go test -update and look at what changed")
	}
}

// Every JSON entry of an example job decodes into its form with nothing left
// over, so the forms of the schema are those of the files.
func TestEntriesHaveTheirForms(t *testing.T) {
	r, _ := Open(exampleJob().write(t, exampleDir(t, 192)))
	seen := 0
	for _, l := range r.Lines() {
		form := formOf(l.Kind, l.Name())
		if form == nil || !strings.HasSuffix(l.File, ".json") {
			continue
		}
		b, err := r.Read(l)
		if err != nil {
			t.Fatal(err)
		}
		d := json.NewDecoder(bytes.NewReader(b))
		d.DisallowUnknownFields()
		if err := d.Decode(newOf(form)); err != nil {
			t.Errorf("%s: %v", l.File, err)
		}
		seen++
	}
	if seen < 12 {
		t.Errorf("only %d entries looked at", seen)
	}
}

// An implementation of JSON Schema that is not ours (the Python package
// jsonschema, Debian's python3-jsonschema) accepts the schema and, under it,
// every entry; and refuses one with a key taken out.
func TestEntriesAgainstJSONSchema(t *testing.T) {
	if exec.Command("python3", "-c", "import jsonschema").Run() != nil {
		t.Skip("no python3-jsonschema here")
	}
	const script = `
import json, sys, glob, os, fnmatch, jsonschema
schema = json.load(open("schema.json"))
jsonschema.Draft202012Validator.check_schema({k: v for k, v in schema.items() if k != "entries"})
n = refused = 0
for path in sorted(glob.glob(os.path.join(sys.argv[1], "*.json"))):
    name = os.path.basename(path)[5:]
    exact = schema["entries"].get(name)
    form = exact or next((v for k, v in schema["entries"].items() if fnmatch.fnmatch(name, k)), None)
    if form is None: continue
    v = jsonschema.Draft202012Validator(dict(form, **{"$defs": schema["$defs"]}))
    entry = json.load(open(path))
    v.validate(entry)
    n += 1
    key = schema["$defs"][form["$ref"].split("/")[-1]]["required"][0]
    del entry[key]
    refused += not v.is_valid(entry)
print(n, refused)
`
	dir := exampleJob().write(t, filepath.Join(t.TempDir(), "job"))
	out, err := exec.Command("python3", "-c", script, dir).CombinedOutput()
	if err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	if got := strings.TrimSpace(string(out)); got != "17 17" {
		t.Errorf("accepted and refused: %s, want 17 17", got)
	}
}
