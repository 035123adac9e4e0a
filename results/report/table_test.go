package report

import (
	"bytes"
	"errors"
	"regexp"
	"strings"
	"testing"

	"github.com/mattn/go-runewidth"

	"ulpine/results"
)

func tableOf(t *testing.T, s *results.Study, width int, color bool) string {
	t.Helper()
	var b bytes.Buffer
	if err := Table(&b, s, width, color); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

var escapes = regexp.MustCompile(`\x1b\[\d+m`)

func TestTableFits(t *testing.T) {
	for _, s := range studies() {
		for _, width := range []int{60, 80, 100, 120, 200} {
			text := tableOf(t, s.Study, width, false)
			if strings.Contains(text, "\x1b") {
				t.Errorf("%s: colour where none was asked for", s.name)
			}
			for _, l := range strings.Split(text, "\n") {
				if w := runewidth.StringWidth(l); w > width {
					t.Errorf("%s at %d: a line of %d: %q", s.name, width, w, l)
				}
			}
			if got := escapes.ReplaceAllString(tableOf(t, s.Study, width, true), ""); got != text {
				t.Errorf("%s at %d: the words change with the colour", s.name, width)
			}
		}
	}
}

func TestTableSays(t *testing.T) {
	s := invented()
	for _, width := range []int{80, 120, 200} {
		text := tableOf(t, s, width, false)
		flat := strings.Join(strings.Fields(text), " ")
		if !strings.HasPrefix(flat, s.Answer) {
			t.Errorf("at %d the answer is not first: %.80q", width, flat)
		}
		for _, w := range []string{
			"margin 0.5 pp", "95 %", "2026-02-03", "● 1 bf16 stochastic update", "○ 2 bf16 nearest", "◐ 3 <b>E6M9</b>", "◌ 4 fp16 nearest",
			"undecided (needs about 46 pairs)", "diverged 3 of 10", "bf16 stochastic update against bf16 nearest", "┃", "2 warnings", s.Warnings[0],
		} {
			if !strings.Contains(flat, w) {
				t.Errorf("at %d the table does not say %q", width, w)
			}
		}
		v := newView(s)
		for _, c := range s.Comparisons {
			for _, w := range []string{v.words.diff(c.Mean), v.words.interval(c.Low, c.High)} {
				if !strings.Contains(text, w) {
					t.Errorf("at %d: no %s", width, w)
				}
			}
		}
	}
}

// TestTableKeepsTerminal: names cannot send orders to the terminal.
func TestTableKeepsTerminal(t *testing.T) {
	s := invented()
	s.Arms[1].Name, s.Answer, s.Warnings[0] = "\x1b[2Jname\x07\r\n", "\x1b]0;title\x07answer", "\x1b[31mred"
	if text := tableOf(t, s, 80, false); strings.ContainsAny(text, "\x1b\x07\r") {
		t.Errorf("%q", text)
	}
}

// TestTextRail reads a drawn rail back.
func TestTextRail(t *testing.T) {
	v := newView(invented())
	r := newTextRail(v, v.Comparisons, 50)
	for i := range v.Comparisons {
		c := &v.Comparisons[i]
		line := []rune(r.draw(c))
		if len(line) != 50 {
			t.Fatalf("%d cells", len(line))
		}
		mean := -1
		for k, ch := range line {
			if strings.ContainsRune("●○◐◌", ch) {
				mean = k
			}
		}
		if mean != r.at(c.Mean) {
			t.Errorf("%s: the mark is in cell %d, want %d", c.Arm, mean, r.at(c.Mean))
		}
		if k := r.at(-c.Margin); line[k] != '┃' && line[k] != '╋' && k != mean {
			t.Errorf("%s: no post in cell %d of %s", c.Arm, k, string(line))
		}
	}
	if head := r.head(); !strings.Contains(head, "−0.5") || []rune(head)[r.at(0)] != '0' {
		t.Errorf("head %q", head)
	}
}

type brokenPipe struct{}

var errPipe = errors.New("broken pipe")

func (brokenPipe) Write([]byte) (int, error) { return 0, errPipe }

func TestTableTellsErrors(t *testing.T) {
	if err := Table(brokenPipe{}, invented(), 80, false); !errors.Is(err, errPipe) {
		t.Errorf("%v", err)
	}
	if err := HTML(brokenPipe{}, invented()); !errors.Is(err, errPipe) {
		t.Errorf("%v", err)
	}
	if err := JSON(brokenPipe{}, invented()); !errors.Is(err, errPipe) {
		t.Errorf("%v", err)
	}
	for _, name := range SheetNames() {
		if err := Sheet(brokenPipe{}, invented(), name); !errors.Is(err, errPipe) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
