package pgserver

import (
	"os/exec"
	"runtime"
	"syscall"
)

// attributes makes the server die with us, and gives it its user.
func attributes(who *syscall.Credential) *syscall.SysProcAttr {
	return &syscall.SysProcAttr{Credential: who, Pdeathsig: syscall.SIGINT}
}

// startOnKeptThread starts a command from a thread that lives as long as the process: the kernel sends the death signal
// when the starting thread ends, and Go's threads come and go.
func startOnKeptThread(cmd *exec.Cmd) error {
	started := make(chan error)
	go func() {
		runtime.LockOSThread() // never unlocked: the thread is kept
		started <- cmd.Start()
		select {}
	}()
	return <-started
}
