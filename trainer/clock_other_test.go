//go:build !unix

package trainer

import "time"

var began = time.Now()

// cpuTime is the time of day where the system tells no better.
func cpuTime() time.Duration { return time.Since(began) }
