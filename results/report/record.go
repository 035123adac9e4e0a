package report

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"ulpine/results"
)

// runSection lists every run, the diverged ones included.
func runSection(v *view) any {
	summary, t := v.runTable()
	return struct {
		Summary string
		Table   tabular
	}{summary, t}
}

// runTable is the table of runs with its summary.
func (v *view) runTable() (summary string, t tabular) {
	t = tabular{
		Caption: "All runs with their digests",
		Columns: columns("Run", "state", "outcome", "#training loss", "#"+plain(v.Metric), "#steps skipped", "#seconds", "digest"),
	}
	diverged, stalled := 0, 0
	for i := range v.Runs {
		r := &v.Runs[i]
		if r.Diverged != "" {
			diverged++
		}
		if r.Stalled {
			stalled++
		}
		t.Rows = append(t.Rows, v.runRow(r))
	}
	return fmt.Sprintf("%s; %d diverged, %d stalled. A run that diverged stopped there and is scored as it stands: it counts as an outcome. The digest covers loss curve, counters and final weights.",
		plural(len(v.Runs), "run"), diverged, stalled), t
}

// runRow is one run: its last epoch, and the steps skipped in all of them.
func (v *view) runRow(r *results.Run) []string {
	loss, score, skipped := math.NaN(), math.NaN(), uint64(0)
	if n := len(r.Epochs); n > 0 {
		loss = r.Epochs[n-1].TrainLoss
		for _, e := range r.Epochs {
			skipped += e.Skipped
		}
	}
	if v.words.known {
		score = v.words.metric.Final(r)
	}
	return []string{
		plain(r.Name()), stateWords(r), outcome(r), significant(loss, 4), v.words.value(score),
		strconv.FormatUint(skipped, 10), seconds(r.Wall), fmt.Sprintf("%x", r.Digest[:]),
	}
}

// stateWords is a run's state in the tool's words.
func stateWords(r *results.Run) string {
	switch {
	case r.State == "":
		return missing
	case r.State == results.Failed:
		return fmt.Sprintf("failed (%s)", plain(r.Cause))
	}
	return plain(string(r.State))
}

// outcome says whether a run diverged or stalled.
func outcome(r *results.Run) string {
	switch {
	case r.Diverged != "":
		return fmt.Sprintf("diverged in step %d: %s", r.DivergedStep, plain(r.Diverged))
	case r.Stalled:
		return "stalled"
	case r.State == results.Stored:
		return "trained"
	}
	return missing
}

// seconds spells a duration in seconds; zero means that it was not recorded.
func seconds(d time.Duration) string {
	if d <= 0 {
		return missing
	}
	return fixed(d.Seconds(), 1)
}

// planSection shows the plan as written and as resolved.
func planSection(v *view) any {
	type planText struct {
		fact
		Long bool // not printed
	}
	data := struct {
		Lead  string
		Texts []planText
	}{Lead: "The plan as its author wrote it, and every setting that follows from it."}
	for _, f := range []fact{{"As written: " + plain(v.PlanFile), v.PlanText}, {"Resolved: every point of every arm", v.Resolved}} {
		if text := plainLines(f.Text); text != "" {
			data.Texts = append(data.Texts, planText{fact{f.Head, text}, len(data.Texts) > 0})
		}
	}
	if len(data.Texts) == 0 {
		data.Lead = "The study holds no text of its plan."
	}
	return data
}

// rerunSection is the commands that repeat the study.
func rerunSection(v *view) any {
	return struct{ Commands []string }{rerunLines(v)}
}

func rerunLines(v *view) []string {
	var out []string
	for _, c := range v.Rerun {
		out = append(out, plain(c))
	}
	return out
}

// list is a list of lines, or words in its stead.
type list struct {
	Items   []string
	Without string
}

// warningSection gathers the study's warnings and those of its comparisons.
func warningSection(v *view) any {
	l := list{Without: "None."}
	for _, w := range v.Warnings {
		l.Items = append(l.Items, plain(w))
	}
	for _, cs := range [][]results.Comparison{v.Comparisons, v.Contrasts} {
		for i := range cs {
			for _, w := range cs[i].Warnings {
				l.Items = append(l.Items, v.pairName(&cs[i])+": "+plain(w))
			}
		}
	}
	return l
}

// standing are the cautions that every report carries, each with the words by
// which a study's own caution about the same shows.
func (v *view) standing() []fact {
	sum := "The lengths of the sums in this study were not recorded: nothing can be said about longer ones."
	if n := v.LongestSum; n > 0 {
		sum = fmt.Sprintf("The longest sum tested here has %s. Nothing is claimed for sums beyond four times that, %d terms: rounding errors grow with the length of a sum.", plural(n, "term"), 4*n)
	}
	worst := "Means hide single failures: look at the recall by class and at the worst replicate of each, with its exact interval."
	if len(v.Classes) == 0 {
		worst = "Means hide single failures: look at the worst replicate among the paired differences."
	}
	return []fact{
		{"small networks", "Small networks tolerate more rounding than large ones, and their sums are shorter. What holds here need not hold for a larger network."},
		{"longest sum", sum},
		{"network tested", v.networkLimit()},
		{"undecided", "Undecided does not mean the same: it means that these pairs cannot tell."},
		{"rare inputs", "The scores are those of this data and this training. Rare inputs, drift of the data and faults of the hardware are untested."},
		{"safety-related", "This report is no approval for a safety-related use. Such a use is a matter of the functional-safety standard that applies to it and of qualified engineers."},
		{"worst replicate", worst},
	}
}

// networkLimit names the network that was tested.
func (v *view) networkLimit() string {
	if n := plain(v.Network); n != "" {
		return "The network tested: " + n + ". Every verdict is of this network, this data and this training."
	}
	return "The network was not recorded: nothing can be said about its size."
}

// cautionSection says what this result does not show: the study's own cautions,
// and every standing one that they do not speak of.
func cautionSection(v *view) any {
	l := list{}
	said := strings.ToLower(strings.Join(v.Cautions, "\n"))
	for _, c := range v.standing() {
		if !strings.Contains(said, c.Head) {
			l.Items = append(l.Items, c.Text)
		}
	}
	for _, c := range v.Cautions {
		l.Items = append(l.Items, plain(c))
	}
	return l
}
