package ledger

import (
	"encoding/json"
	"strconv"
	"time"

	"github.com/google/uuid"

	"fettle.example/fettle/ledger/cut"
	"fettle.example/fettle/ledger/proof"
)

// Kinds of entry.
const (
	KindMerge    = "merge"
	KindSplit    = "split"
	KindReversal = "reversal"
)

// Edges are pairs of supervoxels: contacts that the segmentation had accepted, and links that people made.
type Edges struct {
	Contacts [][2]ID
	Links    [][2]ID
}

// Len counts the pairs.
func (e Edges) Len() int { return len(e.Contacts) + len(e.Links) }

// Entry is one line of the ledger.
type Entry struct {
	Volume   string
	Position int64
	ID       uuid.UUID
	Kind     string
	Person   string // handle of the person, or of the machine account, that posted
	Agent    string // the program that posted on the person's behalf, if any
	At       time.Time
	Task     *uuid.UUID
	Reason   string
	Reverses int64  // position of the entry that a reversal undoes, else 0
	Before   []ID   // segments this entry retired
	After    []ID   // segments it made
	Seeds    [][]ID // of a split: the groups that had to come apart, in the order of After
	Joined   Edges  // pairs that became accepted
	Cut      Edges  // pairs that ceased to be
	Cost     int64  // of a split: the minimum cut, equal to the maximum flow, in 1e-6 of log-odds
	Content  []byte // the canonical bytes that were hashed
	Leaf     [32]byte
}

// LogOdds is a split's cost in log-odds (natural logarithm).
func (e Entry) LogOdds() float64 { return float64(e.Cost) * cut.Unit }

// content is what an entry's bytes say, in the order of RFC 8785. The bytes are frozen: a field may be added, and
// must then be omitted when empty; none may be renamed, removed or given another meaning. Every number is text,
// because a JSON number is a double. Golden bytes of each kind are in entry_test.go.
type content struct {
	After    []ID        `json:"after"`
	Agent    string      `json:"agent,omitempty"`
	At       string      `json:"at"`
	Before   []ID        `json:"before"`
	Cost     string      `json:"cost,omitempty"`
	Cut      *edgesJSON  `json:"cut,omitempty"`
	Entry    string      `json:"entry"`
	Format   string      `json:"format"`
	Joined   *edgesJSON  `json:"joined,omitempty"`
	Kind     string      `json:"kind"`
	Person   string      `json:"person"`
	Position string      `json:"position"`
	Reason   string      `json:"reason"`
	Reverses string      `json:"reverses,omitempty"`
	Seeds    [][]ID      `json:"seeds,omitempty"`
	Task     string      `json:"task,omitempty"`
	Volume   volumeBrief `json:"volume"`
}

type edgesJSON struct {
	Contacts [][2]ID `json:"contacts,omitempty"`
	Links    [][2]ID `json:"links,omitempty"`
}

// volumeBrief binds an entry to the base it speaks about.
type volumeBrief struct {
	Digest string `json:"digest"`
	Name   string `json:"name"`
}

// EntryFormat names the layout of an entry's canonical bytes.
const EntryFormat = "fettle entry 1"

// timeLayout is RFC 3339 in UTC with microseconds, the database's resolution.
const timeLayout = "2006-01-02T15:04:05.000000Z"

// seal gives an entry its canonical bytes and its leaf hash (RFC 6962 over RFC 8785).
func (e *Entry) seal(digest string) error {
	c := content{
		After: e.After, Agent: e.Agent, At: e.At.UTC().Format(timeLayout), Before: e.Before,
		Cut: e.Cut.json(), Entry: e.ID.String(), Format: EntryFormat, Joined: e.Joined.json(),
		Kind: e.Kind, Person: e.Person, Position: strconv.FormatInt(e.Position, 10), Reason: e.Reason,
		Seeds: e.Seeds, Volume: volumeBrief{Digest: digest, Name: e.Volume},
	}
	if e.Kind == KindSplit {
		c.Cost = strconv.FormatInt(e.Cost, 10)
	}
	if e.Kind == KindReversal {
		c.Reverses = strconv.FormatInt(e.Reverses, 10)
	}
	if e.Task != nil {
		c.Task = e.Task.String()
	}
	b, err := proof.Canonical(c)
	if err != nil {
		return err
	}
	e.Content, e.Leaf = b, proof.LeafHash(b)
	return nil
}

// seedsFromContent reads the groups of a split back from the canonical bytes, which alone hold them.
func (e *Entry) seedsFromContent() [][]ID {
	var c struct {
		Seeds [][]ID `json:"seeds"`
	}
	if e.Kind != KindSplit || json.Unmarshal(e.Content, &c) != nil {
		return nil
	}
	return c.Seeds
}

func (e Edges) json() *edgesJSON {
	if e.Len() == 0 {
		return nil
	}
	return &edgesJSON{Contacts: e.Contacts, Links: e.Links}
}

// flat lays pairs out as the database stores them: two ids a pair.
func flat(pairs [][2]ID) []ID {
	out := make([]ID, 0, 2*len(pairs))
	for _, p := range pairs {
		out = append(out, p[0], p[1])
	}
	return out
}

func unflat(flat []ID) [][2]ID {
	if len(flat) == 0 {
		return nil
	}
	out := make([][2]ID, 0, len(flat)/2)
	for i := 0; i+1 < len(flat); i += 2 {
		out = append(out, [2]ID{flat[i], flat[i+1]})
	}
	return out
}
