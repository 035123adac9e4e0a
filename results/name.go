package results

import "strconv"

// RunName is how a run is called on the command line and in print.
func RunName(arm string, replicate uint64) string {
	return arm + "/" + strconv.FormatUint(replicate, 10)
}
