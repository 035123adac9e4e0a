package main

import (
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestCost(t *testing.T) {
	inFolder(t, map[string]string{"tiny.toml": tiny, "machine.toml": "[machine]\nname = \"bench\"\ndate = \"2026\"\nsource = \"x\"\nbandwidth = 1e9\n"})
	text := must(t, "cost", "tiny.toml")
	for _, want := range []string{"bf16 nearest moves the fewest bytes", "accelerator-2020", "Cautions"} {
		if !strings.Contains(text, want) {
			t.Errorf("cost lacks %q:\n%s", want, text)
		}
	}
	if detailed := must(t, "cost", "tiny.toml", "--detail"); len(detailed) <= len(text) {
		t.Error("--detail adds nothing")
	}
	var r struct {
		Machine struct{ Name string }
		Arms    []struct{ Slug string }
	}
	if err := json.Unmarshal([]byte(must(t, "cost", "tiny.toml", "--json", "--machine", "cpu-core-2020")), &r); err != nil {
		t.Fatal(err)
	}
	if r.Machine.Name != "cpu-core-2020" || len(r.Arms) != 2 || r.Arms[0].Slug != "bf16-nearest" {
		t.Errorf("%+v", r)
	}
	for _, c := range []struct{ machine, want string }{
		{"machine.toml", "machine.toml:1: machine.cache: a cache of 0 bytes; give"},
		{"acelerator", "--machine acelerator: no built-in machine and no file; built in are accelerator-2020"},
		{"gone.toml", "gone.toml: cannot read"},
	} {
		if _, errs, code := ulpine(t, "cost", "tiny.toml", "--machine", c.machine); code != exitBadInput || !strings.Contains(errs, c.want) {
			t.Errorf("%s: exit code %d, %s", c.machine, code, errs)
		}
	}
}

// TestReportTables: a report's costs come from the tables that its flags name, and
// what is wrong with a table is told before anything is written.
func TestReportTables(t *testing.T) {
	inFolder(t, map[string]string{
		"tiny.toml": tiny,
		"slow.toml": "[machine]\nname = \"test bench\"\ndate = \"2026\"\nsource = \"made up\"\nbandwidth = 1e6\ncache = 1024\n\n[[machine.rate]]\noperands = \"fp32\"\nmultiply_adds = 1e15\n",
		"bad.toml":  "[machine]\nname = \"bench\"\n",
	})
	must(t, "run", "tiny.toml", "--no-report", "--quiet")
	costs := func(args ...string) string {
		t.Helper()
		must(t, append([]string{"report", "tiny.toml", "--to", "r"}, args...)...)
		b, err := os.ReadFile(filepath.Join("r", "report.md"))
		if err != nil {
			t.Fatal(err)
		}
		return string(b)
	}
	if s := costs(); !strings.Contains(s, "Machine: accelerator\\-2020") && !strings.Contains(s, "Machine: accelerator-2020") {
		t.Error("without a flag the report does not name the default machine")
	}
	if s := costs("--machine", "slow.toml"); !strings.Contains(s, "Machine: test bench, made up, 2026") || !strings.Contains(s, "On test bench its step") {
		t.Errorf("the report does not name the machine of --machine")
	}
	for _, args := range [][]string{{"--machine", "bad.toml"}, {"--machine", "nowhere"}, {"--energy", "slow.toml"}} {
		_, errs, code := ulpine(t, append([]string{"report", "tiny.toml", "--to", "not-written"}, args...)...)
		if code != exitBadInput || !strings.Contains(errs, strings.TrimSuffix(args[1], ".toml")) {
			t.Errorf("%v: exit code %d, %s", args, code, errs)
		}
	}
	if _, err := os.Stat("not-written"); err == nil {
		t.Error("a report was written in spite of a bad table")
	}
}
