//go:build unix

package quant

import (
	"syscall"
	"time"
)

// cpuTime is the time that processors have spent on this process: unlike the time of
// day it stands still while others have the processor.
func cpuTime() time.Duration {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		panic(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}
