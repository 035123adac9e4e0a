package main

import (
	"encoding/json"
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
