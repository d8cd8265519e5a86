//go:build linux || darwin || freebsd || netbsd || openbsd || dragonfly

package atomicfile

import (
	"errors"
	"os"
	"syscall"
)

// tryFlock takes an exclusive advisory lock without waiting. able is false on
// file systems that have none.
func tryFlock(f *os.File) (got, able bool, err error) {
	for {
		err = syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
		if err != syscall.EINTR {
			break
		}
	}
	switch {
	case err == nil:
		return true, true, nil
	case errors.Is(err, syscall.EWOULDBLOCK):
		return false, true, nil
	case errors.Is(err, syscall.ENOTSUP), errors.Is(err, syscall.EOPNOTSUPP), errors.Is(err, syscall.ENOSYS), errors.Is(err, syscall.ENOLCK):
		return false, false, nil
	}
	return false, false, &os.PathError{Op: "lock", Path: f.Name(), Err: err}
}

func running(pid int) bool { return !errors.Is(syscall.Kill(pid, 0), syscall.ESRCH) }

func cannotSync(err error) bool {
	return errors.Is(err, syscall.EINVAL) || errors.Is(err, syscall.ENOTSUP) || errors.Is(err, syscall.EBADF)
}

// Full reports whether err says that the disk or the quota is used up.
func Full(err error) bool {
	return errors.Is(err, syscall.ENOSPC) || errors.Is(err, syscall.EDQUOT)
}
