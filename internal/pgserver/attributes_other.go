//go:build !linux

package pgserver

import (
	"os/exec"
	"syscall"
)

// attributes gives the server its user. Only Linux can make it die with us; elsewhere a killed fettled leaves it running,
// and the next start says so.
func attributes(who *syscall.Credential) *syscall.SysProcAttr {
	return &syscall.SysProcAttr{Credential: who}
}

func startOnKeptThread(cmd *exec.Cmd) error { return cmd.Start() }
