package tasks

import (
	"context"
	"time"

	"github.com/google/uuid"
)

// Token is what proves who asks. Its secret is shown once and never stored.
type Token struct {
	ID       uuid.UUID
	Handle   string
	Note     string // what for: "laptop"
	IssuedBy string
	IssuedAt time.Time
	LastUsed *time.Time // to the minute
	Revoked  *time.Time
}

// IssueToken makes a token. A lead and the operator may issue for anybody, a person for themselves.
func (pp *People) IssueToken(ctx context.Context, by, handle, note string) (secret string, t Token, err error) {
	return "", Token{}, errNotYet
}

// Tokens lists a person's tokens, newest first, revoked ones too.
func (pp *People) Tokens(ctx context.Context, handle string) ([]Token, error) { return nil, errNotYet }

// RevokeToken ends a token at once. A lead and the operator may revoke anybody's, a person their own.
func (pp *People) RevokeToken(ctx context.Context, by string, id uuid.UUID) (Token, error) {
	return Token{}, errNotYet
}

// Authenticate finds whose secret it is; anything else is fault.Unauthenticated.
func (pp *People) Authenticate(ctx context.Context, secret string) (Person, error) {
	return Person{}, errNotYet
}
