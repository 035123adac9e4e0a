package plan

import "strings"

// The names of runs that are not an arm's of the plan.
const (
	BaselineSlug = "baseline"
	PretrainSlug = "pretrain"
)

// Slug is how an arm is called in run names and file names: its name in lower
// case, every run of other characters than letters and digits a hyphen:
// "fp16 nearest, fp16 sums" is fp16-nearest-fp16-sums.
func Slug(name string) string {
	var b strings.Builder
	gap := false
	for _, c := range strings.ToLower(name) {
		if c >= 'a' && c <= 'z' || c >= '0' && c <= '9' {
			if gap && b.Len() > 0 {
				b.WriteByte('-')
			}
			gap = false
			b.WriteRune(c)
			continue
		}
		gap = true
	}
	return b.String()
}
