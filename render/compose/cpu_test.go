package compose

import (
	"syscall"
	"testing"
	"time"
)

// cpu returns the time that this process has spent computing, which does not depend on
// what else the machine does.
func cpu(t *testing.T) time.Duration {
	t.Helper()
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		t.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}
