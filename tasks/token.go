package tasks

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"encoding/base64"
	"errors"
	"strings"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Token is what proves who asks. Its secret is shown once and never stored: what the database holds can't be used
// to sign in.
type Token struct {
	ID       uuid.UUID
	Handle   string
	Note     string // what for: "laptop"
	IssuedBy string
	IssuedAt time.Time
	LastUsed *time.Time // to the minute
	Revoked  *time.Time
}

// tokenPrefix makes a secret recognisable where it does not belong, in a log or a repository.
const tokenPrefix = "fettle_"

// secretBytes are random, so that nobody can guess a secret, nor find it from its plain hash.
const secretBytes = 32

const tokenColumns = `token_id, handle, note, coalesce(issued_by, 'operator'), issued_at, last_used, revoked_at`

func scanToken(row pgx.CollectableRow) (t Token, err error) {
	err = row.Scan(&t.ID, &t.Handle, &t.Note, &t.IssuedBy, &t.IssuedAt, &t.LastUsed, &t.Revoked)
	return t, err
}

// IssueToken makes a token. A lead and the operator may issue for anybody, a person for themselves.
func (pp *People) IssueToken(ctx context.Context, by, handle, note string) (secret string, t Token, err error) {
	if err := pp.mayManage(ctx, by, handle); err != nil {
		return "", Token{}, err
	}
	p, err := pp.Get(ctx, handle)
	if err != nil {
		return "", Token{}, err
	}
	if p.Left {
		return "", Token{}, fault.Newf(fault.Conflict, "person-left", "%s has left", handle).
			WithNext("issue tokens to people who are here")
	}
	id, err := uuid.NewV7()
	if err != nil {
		return "", Token{}, err
	}
	raw := make([]byte, secretBytes)
	_, _ = rand.Read(raw) // never fails, says its documentation
	secret = tokenPrefix + base64.RawURLEncoding.EncodeToString(raw)
	t, err = pp.token(ctx, `
		insert into token (token_id, handle, hash, note, issued_by) values ($1, $2, $3, $4, nullif($5, 'operator'))
		returning `+tokenColumns, id, handle, hash(secret), note, by)
	if pg.Constraint(err) == "token_note" {
		err = fault.New(fault.Invalid, "note-long", "the note is longer than 200 characters").
			WithField("note").WithNext("say it shorter")
	}
	if err != nil {
		return "", Token{}, err
	}
	return secret, t, nil
}

func hash(secret string) []byte {
	h := sha256.Sum256([]byte(secret))
	return h[:]
}

// Tokens lists a person's tokens, newest first, revoked ones too.
func (pp *People) Tokens(ctx context.Context, handle string) ([]Token, error) {
	rows, err := pp.pool.Query(ctx, `select `+tokenColumns+` from token where handle = $1 order by issued_at desc, token_id desc`, handle)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, scanToken)
}

// RevokeToken ends a token at once. A lead and the operator may revoke anybody's, a person their own. One that was
// revoked before stays as it is.
func (pp *People) RevokeToken(ctx context.Context, by string, id uuid.UUID) (Token, error) {
	t, err := pp.token(ctx, `select `+tokenColumns+` from token where token_id = $1`, id)
	if errors.Is(err, pgx.ErrNoRows) {
		return t, fault.Newf(fault.NotFound, "token-unknown", "there is no token %s", id).WithNext("list the person's tokens")
	}
	if err != nil {
		return t, err
	}
	if err := pp.mayManage(ctx, by, t.Handle); err != nil {
		return Token{}, err
	}
	return pp.token(ctx, `
		update token set revoked_at = coalesce(revoked_at, now()),
		       revoked_by = case when revoked_at is null then nullif($2, 'operator') else revoked_by end
		 where token_id = $1 returning `+tokenColumns, id, by)
}

func (pp *People) token(ctx context.Context, sql string, args ...any) (Token, error) {
	rows, err := pp.pool.Query(ctx, sql, args...)
	if err != nil {
		return Token{}, err
	}
	return pgx.CollectExactlyOneRow(rows, scanToken)
}

// Authenticate finds whose secret it is; anything else is fault.Unauthenticated. The lookup is by hash, so its time
// tells nothing about the secret. That the token was used is written down once a minute, to spare the disk.
func (pp *People) Authenticate(ctx context.Context, secret string) (Person, error) {
	refused := fault.New(fault.Unauthenticated, "token-unknown", "the token is not known, or was revoked").
		WithNext("ask a lead for a token")
	if !strings.HasPrefix(secret, tokenPrefix) {
		return Person{}, refused
	}
	var id uuid.UUID
	var stale bool
	var p Person
	err := pp.pool.QueryRow(ctx, `
		select token_id, last_used is null or last_used < now() - interval '1 minute', handle, roles, coalesce(added_by, 'operator'), added_at
		  from token join person using (handle)
		 where hash = $1 and revoked_at is null and left_at is null`, hash(secret)).
		Scan(&id, &stale, &p.Handle, &p.Roles, &p.AddedBy, &p.AddedAt)
	if errors.Is(err, pgx.ErrNoRows) {
		return Person{}, refused
	}
	if err != nil {
		return Person{}, err
	}
	if stale {
		_, err = pp.pool.Exec(ctx, `update token set last_used = now() where token_id = $1`, id)
	}
	return p, err
}
