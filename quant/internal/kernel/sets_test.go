package kernel

import (
	"os"
	"runtime"
	"slices"
	"strings"
	"testing"
)

// processorFlags are the processor's features as the operating system reports them,
// nil where it does not.
func processorFlags() []string {
	text, err := os.ReadFile("/proc/cpuinfo")
	if err != nil {
		return nil
	}
	for _, line := range strings.Split(string(text), "\n") {
		if name, list, ok := strings.Cut(line, ":"); ok && strings.TrimSpace(name) == "flags" {
			return strings.Fields(list)
		}
	}
	return nil
}

// TestAssemblyIsSelected fails where the processor has what a set needs, by another
// source than the dispatcher's, and the set is not there.
func TestAssemblyIsSelected(t *testing.T) {
	if !assembly {
		if len(Sets) != 1 || Sets[0] != Portable {
			t.Fatalf("a build without assembly has %d sets", len(Sets))
		}
		t.Skipf("built without assembly (%s or purego)", runtime.GOARCH)
	}
	flags := processorFlags()
	if flags == nil {
		t.Skip("the operating system does not report the processor's features")
	}
	has := func(features ...string) bool {
		for _, f := range features {
			if !slices.Contains(flags, f) {
				return false
			}
		}
		return true
	}
	names := func() (n []string) {
		for _, s := range Sets {
			n = append(n, s.Name)
		}
		return n
	}()
	if has("avx2", "fma", "f16c") && !slices.Contains(names, "avx2") {
		t.Errorf("the processor has AVX2 and FMA, the sets are %v", names)
	}
	if has("avx2", "fma", "avx512f", "avx512bw", "avx512dq", "avx512vl") && names[0] != "avx512" {
		t.Errorf("the processor has AVX-512, the sets are %v", names)
	}
	if names[len(names)-1] != "portable" {
		t.Errorf("the portable set is not the last of %v", names)
	}
}
