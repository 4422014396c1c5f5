package pgserver

import (
	"io"
	"strings"
	"sync"
)

// lastLines keeps the end of what the server said, for the message when it stops at once.
type lastLines struct {
	mu   sync.Mutex
	kept []byte
	also io.Writer
}

const keptBytes = 600

func (l *lastLines) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.kept = append(l.kept, p...)
	if n := len(l.kept); n > keptBytes {
		l.kept = l.kept[n-keptBytes:]
	}
	if l.also != nil {
		return l.also.Write(p)
	}
	return len(p), nil
}

func (l *lastLines) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return strings.Join(strings.Fields(string(l.kept)), " ")
}
