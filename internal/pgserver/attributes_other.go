//go:build !linux

package pgserver

import (
	"os/exec"
	"strconv"
	"syscall"
)

// attributes gives the server its user, and keeps a terminal's Ctrl-C from it. Only Linux can end it when we die;
// elsewhere the next start ends the one that was left behind.
func attributes(who *syscall.Credential) *syscall.SysProcAttr {
	return &syscall.SysProcAttr{Credential: who, Setpgid: true}
}

func startAndWait(cmd *exec.Cmd) (ended <-chan error, err error) {
	if err := cmd.Start(); err != nil {
		return nil, err
	}
	over := make(chan error, 1)
	go func() { over <- cmd.Wait() }()
	return over, nil
}

// commandLine is what a process was started with; empty when it has ended.
func commandLine(pid int) string {
	out, err := exec.Command("ps", "-o", "args=", "-p", strconv.Itoa(pid)).Output()
	if err != nil {
		return ""
	}
	return string(out)
}
