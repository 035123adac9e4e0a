package main

import (
	"encoding/json"
	"strings"
	"testing"
)

// A single row of a report, repeated in an empty store, has the row's digest; the rest
// of the plan is not run, and a name that is no run of the plan is one clear error.
func TestRunOnly(t *testing.T) {
	inFolder(t, map[string]string{"tiny.toml": tiny})
	must(t, "run", "tiny.toml", "--no-report", "--quiet")
	type row struct{ Run, Digest string }
	var all []row
	for line := range strings.Lines(must(t, "list", "--json")) { // an object a line
		var r row
		if err := json.Unmarshal([]byte(line), &r); err != nil || len(r.Digest) != 64 {
			t.Fatal(err, line)
		}
		all = append(all, r)
	}
	for _, want := range all[1:3] {
		text := must(t, "run", "tiny.toml", "--quiet", "--store", "row.store", "--only", want.Run)
		if !strings.Contains(text, want.Run+"  stored\n") || !strings.Contains(text, "digest "+want.Digest+"\n") {
			t.Errorf("%s: want digest %s in\n%s", want.Run, want.Digest, text)
		}
	}
	if rows := must(t, "list", "--store", "row.store"); strings.Contains(rows, all[0].Run+" ") {
		t.Errorf("%s was run too:\n%s", all[0].Run, rows)
	}
	for name, want := range map[string]string{"nobody/100": "has no arm", "baseline/7": "has no replicate 7", "baseline": "arm/replicate"} {
		if _, errs, code := ulpine(t, "run", "tiny.toml", "--quiet", "--only", name); code != exitBadInput || !strings.Contains(errs, want) {
			t.Errorf("--only %s: exit %d, %q", name, code, errs)
		}
	}
}
