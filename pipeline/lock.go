package pipeline

import (
	"errors"
	"os"
	"syscall"
)

// tryLock marks an open file as in use until it is closed or its process ends,
// however it ends. It returns false if somebody else has it; a file system
// without locks never says so.
func tryLock(f *os.File) bool {
	return !errors.Is(syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB), syscall.EWOULDBLOCK)
}
