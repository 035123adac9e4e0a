package results

import (
	"fmt"
	"strconv"
	"strings"
)

// RunName is how a run is called on the command line and in print.
func RunName(arm string, replicate uint64) string {
	return arm + "/" + strconv.FormatUint(replicate, 10)
}

// ParseRunName takes a run's name apart into the arm's slug and the replicate.
func ParseRunName(name string) (arm string, replicate uint64, err error) {
	arm, number, found := strings.Cut(strings.TrimSpace(name), "/")
	if !found || arm == "" {
		return "", 0, fmt.Errorf("%q names no run: a run is called arm/replicate, for instance baseline/100", name)
	}
	replicate, err = strconv.ParseUint(number, 10, 64)
	if err != nil {
		return "", 0, fmt.Errorf("%q names no run: %q is no replicate's number; a run is called arm/replicate, for instance baseline/100", name, number)
	}
	return arm, replicate, nil
}
