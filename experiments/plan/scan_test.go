package plan

import (
	"strings"
	"testing"
)

// line returns the scanned line of a path given as words; "#2" is an index.
func lineOf(places map[path]place, words string) int {
	var p path
	for _, w := range strings.Fields(words) {
		if strings.HasPrefix(w, "#") {
			p += pathSeparator + "\x01" + path(w[1:])
		} else {
			p = p.key(w)
		}
	}
	return places[p].line
}

func TestScanNamesTheLineOfEveryKey(t *testing.T) {
	text := strings.Join([]string{
		"\ufefftitle = 'it''s # no comment'",    // 1
		"",                                      // 2
		"# [comment]",                           // 3
		"[a.b]  # open",                         // 4
		"x.y = 1",                               // 5
		"x.z = { p = 1, q.r = { s = 2 } }",      // 6
		`"quoted key" = "a \" [b] = "`,          // 7
		"long = \"\"\"",                         // 8
		"  inner = 3",                           // 9
		"  [no.header] \\\"\"\" \\",             // 10
		"\"\"\"\"",                              // 11
		"after = true",                          // 12
		"[[arm]]",                               // 13
		"name = 'one'",                          // 14
		"update.master = { format = \"bf16\" }", // 15
		"[[arm]]",                               // 16
		"name = '''",                            // 17
		"two'''",                                // 18
		"[arm.training]",                        // 19
		"epochs = 3",                            // 20
		"[[arm.sub]]",                           // 21
		"k = [ [1, 2], # c ]",                   // 22
		"  [3,",                                 // 23
		"   4],",                                // 24
		"  { m = 5 } ]",                         // 25
		`"\u00e9\x41\t\U0001F600" = 1979-05-27 07:32:00`, // 26
		"[ 'w' . \"v\" ]", // 27
		"last=1",          // 28
	}, "\r\n")
	places, _ := scan(text)
	for words, want := range map[string]int{
		"title": 1, "a": 4, "a b": 4, "a b x": 5, "a b x y": 5, "a b x z": 6,
		"a b x z p": 6, "a b x z q": 6, "a b x z q r s": 6, "a b long": 8, "a b after": 12,
		"arm": 13, "arm #0": 13, "arm #0 name": 14, "arm #0 update": 15, "arm #0 update master format": 15,
		"arm #1": 16, "arm #1 name": 17, "arm #1 training": 19, "arm #1 training epochs": 20,
		"arm #1 sub #0": 21, "arm #1 sub #0 k": 22, "arm #1 sub #0 k #0 #1": 22, "arm #1 sub #0 k #1": 23,
		"arm #1 sub #0 k #1 #1": 24, "arm #1 sub #0 k #2 m": 25, "w v": 27, "w v last": 28,
	} {
		if got := lineOf(places, words); got != want {
			t.Errorf("line of %q is %d, want %d", words, got, want)
		}
	}
	if got := places[path("a").key("b").key("quoted key")].line; got != 7 {
		t.Errorf("line of the quoted key is %d, want 7", got)
	}
	odd := path("arm").index(1).key("sub").index(0).key("éA\t😀")
	if got := places[odd].line; got != 26 {
		t.Errorf("line of the escaped key is %d, want 26", got)
	}
	for _, p := range []path{"inner", "no", "no\x00header", "b"} {
		if _, found := places[p]; found {
			t.Errorf("%q was found inside a string", p)
		}
	}
}

func TestScanMarksInlineTables(t *testing.T) {
	places, _ := scan("a = { b = 1 }\nc.d = { }\n[e]\nf = [ { g = 1 } ]\n")
	for p, want := range map[path]bool{
		"a": true, path("c"): false, path("c").key("d"): true, "e": false, path("e").key("f"): false,
		path("e").key("f").index(0): true,
	} {
		at, known := places[p]
		if !known || at.inline != want {
			t.Errorf("%q: found %t, inline %t, want %t", p, known, at.inline, want)
		}
	}
}

// everyPath calls visit for each path of a decoded tree.
func everyPath(p path, v any, visit func(path)) {
	if p != "" {
		visit(p)
	}
	switch v := v.(type) {
	case map[string]any:
		for k, sub := range v {
			if k != "" || p != "" { // the empty top-level key has the root's path
				everyPath(p.key(k), sub, visit)
			}
		}
	case []map[string]any:
		for i, sub := range v {
			everyPath(p.index(i), sub, visit)
		}
	case []any:
		for i, sub := range v {
			everyPath(p.index(i), sub, visit)
		}
	}
}

// FuzzScan holds the scanner to the decoder: every path of a text that decodes
// has a line inside the text.
func FuzzScan(f *testing.F) {
	f.Add("a = 1\n[b.c]\nd = [ { e = '''\n''' }, [ 1 , ] ]\n[[f]]\n[[f.g]]\n\"h\\\"\" = -inf # x\n")
	f.Add("x = \"\"\"\\\n  \"\" \"\"\"\"\"\ny.'z'.\"w\" = 07:32:00\n")
	f.Add("a = {\n b = 1, # c\n}\n")
	f.Fuzz(func(t *testing.T, text string) {
		places, deep := scan(text) // must stand any text
		if _, ok := invalidText(text); !ok || len(text) > 4096 {
			return
		}
		tree, err := decode(text)
		if err != nil {
			return
		}
		if deep > 0 {
			return
		}
		lines := 1 + strings.Count(text, "\n")
		everyPath("", tree, func(p path) {
			if at, known := places[p]; !known || at.line < 1 || at.line > lines {
				t.Errorf("path %q: known %t, line %d of %d", p, known, at.line, lines)
			}
		})
	})
}
