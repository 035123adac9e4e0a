package plan

import (
	"slices"

	"ulpine/quant"
	"ulpine/trainer"
)

// The names of runs of controls.
const (
	ControlFP64Slug     = "control-fp64"
	ControlPairwiseSlug = "control-pairwise"
)

// controlSlugs are all of them.
var controlSlugs = []string{ControlFP64Slug, ControlPairwiseSlug}

// readControls reads [controls]: the baseline again in binary64, and with its sums
// added pairwise. A table that says nothing asks for both. Controls are no arms:
// they get no verdict, and their differences from the baseline are the noise floor
// of all others.
func (r *armReader) readControls(root *node, baseline *Arm) []Arm {
	n := r.table(root, "controls", "[controls] with fp64 = true and pairwise = true")
	if n == nil {
		return nil
	}
	r.known(n, "fp64", "pairwise")
	var all []Arm
	if r.flag(n, "fp64", true) {
		a := everywhere(quant.Binary64, len(r.network.Layers))
		a.spelled = []string{"everything fp64"}
		all = append(all, r.control("the baseline in binary64", ControlFP64Slug, &a, baseline))
	}
	if r.flag(n, "pairwise", true) {
		a := baseline.assignment.inherit()
		a.spelled = []string{"as the baseline, sums pairwise"}
		for _, slots := range append(slices.Clone(a.layers), a.slots) {
			for _, id := range allPoints() {
				if isSum(id) || isStatistic(id) {
					slots[id].value.order = quant.Order{Kind: quant.Pairwise}
				}
			}
		}
		all = append(all, r.control("the baseline with pairwise sums", ControlPairwiseSlug, &a, baseline))
	}
	return all
}

// control is an arm that trains as the baseline does.
func (r *armReader) control(name, slug string, a *assignment, baseline *Arm) Arm {
	var scale trainer.LossScale
	if len(baseline.Arithmetic.Layers) > 0 {
		scale = baseline.Arithmetic.LossScale
	}
	return r.finish(Arm{Name: name, Slug: slug, Training: baseline.Training}, a, scale)
}

// controlsText says where the noise floor of a plan's comparisons comes from.
func (p *Plan) controlsText() string {
	if len(p.Controls) == 0 {
		return "none: no noise floor is known; [controls] asks for one"
	}
	names := make([]string, len(p.Controls))
	for i := range p.Controls {
		names[i] = p.Controls[i].Name
	}
	return joined(names) + ", in every replicate: the noise floor of all comparisons"
}
