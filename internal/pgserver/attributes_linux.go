package pgserver

import (
	"fmt"
	"os"
	"os/exec"
	"runtime"
	"strings"
	"syscall"
)

// attributes gives the server its user, lets it shut down when we die, and keeps a terminal's Ctrl-C from it: we want
// to finish our work with it first.
func attributes(who *syscall.Credential) *syscall.SysProcAttr {
	return &syscall.SysProcAttr{Credential: who, Pdeathsig: syscall.SIGINT, Setpgid: true}
}

// startAndWait starts a command from a thread that lives as long as the command: the kernel sends the death signal when
// the starting thread ends, and Go's threads come and go.
func startAndWait(cmd *exec.Cmd) (ended <-chan error, err error) {
	started, over := make(chan error), make(chan error, 1)
	go func() {
		runtime.LockOSThread()
		defer runtime.UnlockOSThread()
		err := cmd.Start()
		started <- err
		if err == nil {
			over <- cmd.Wait()
		}
	}()
	return over, <-started
}

// commandLine is what a process was started with; empty when it has ended.
func commandLine(pid int) string {
	b, err := os.ReadFile(fmt.Sprintf("/proc/%d/cmdline", pid))
	if err != nil {
		return ""
	}
	return strings.ReplaceAll(string(b), "\x00", " ")
}
