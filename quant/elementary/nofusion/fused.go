package nofusion

import (
	"bufio"
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// fusedLine matches a fused multiply-add of arm64 in the compiler's listing, with
// the file and line of the source it comes from.
var fusedLine = regexp.MustCompile(`\(([^()]+):(\d+)\)\s+FN?M(?:ADD|SUB)[SD]\s`)

// Fused compiles packages for arm64, where the compiler fuses whatever the language
// lets it, and lists the source lines that became fused multiply-adds without
// asking for it by math.FMA; asked counts those that did. Unlike Check it knows
// types and sees what the compiler really does, but needs the Go tool. Generic
// functions are seen only in packages that instantiate them.
func Fused(packages ...string) (faults []string, asked int, err error) {
	cmd := exec.Command("go", append([]string{"build", "-gcflags=-S"}, packages...)...)
	cmd.Env = append(os.Environ(), "GOOS=linux", "GOARCH=arm64", "CGO_ENABLED=0")
	listing, err := cmd.CombinedOutput()
	if err != nil {
		tail := listing[max(len(listing)-2000, 0):]
		return nil, 0, fmt.Errorf("compile for arm64: %w: %s", err, tail)
	}
	for _, at := range fusedLine.FindAllSubmatch(listing, -1) {
		file := string(at[1])
		number, _ := strconv.Atoi(string(at[2]))
		text, err := sourceLine(file, number)
		if err != nil {
			return nil, 0, err
		}
		if strings.Contains(text, "math.FMA(") {
			asked++
			continue
		}
		faults = append(faults, fmt.Sprintf("%s:%d: fused on arm64: %s", file, number, strings.TrimSpace(text)))
	}
	slices.Sort(faults)
	return slices.Compact(faults), asked, nil
}

// sourceLine returns line number of a file, from 1.
func sourceLine(file string, number int) (string, error) {
	content, err := os.ReadFile(file)
	if err != nil {
		return "", err
	}
	lines := bufio.NewScanner(bytes.NewReader(content))
	lines.Buffer(nil, 1<<20)
	for n := 1; lines.Scan(); n++ {
		if n == number {
			return lines.Text(), nil
		}
	}
	return "", fmt.Errorf("%s has no line %d", file, number)
}
