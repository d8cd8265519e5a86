//go:build !(linux || darwin || freebsd || netbsd || openbsd || dragonfly)

package atomicfile

import (
	"os"
	"runtime"
	"syscall"
)

func tryFlock(*os.File) (got, able bool, err error) { return false, false, nil }

// running asks the system where finding a process opens it; elsewhere a
// process is taken to run, and its lock must be removed by hand.
func running(pid int) bool {
	if runtime.GOOS != "windows" {
		return true
	}
	p, err := os.FindProcess(pid)
	if err != nil {
		return false
	}
	p.Release()
	return true
}

func cannotSync(error) bool { return true }

// Full reports whether err says that the disk is used up.
func Full(err error) bool {
	const diskFull, handleDiskFull = syscall.Errno(112), syscall.Errno(39)
	for err != nil {
		if e, ok := err.(syscall.Errno); ok {
			return runtime.GOOS == "windows" && (e == diskFull || e == handleDiskFull)
		}
		u, ok := err.(interface{ Unwrap() error })
		if !ok {
			return false
		}
		err = u.Unwrap()
	}
	return false
}
