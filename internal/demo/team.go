// Package demo is the simulated team of the demonstration: proofreaders, reviewers and a lead who know the truth of an
// invented volume and work on it as real people would, through the API alone.
//
// It promises that the same truth and the same seed give the same people: what each of them thinks of a place does not
// depend on the order in which places come. What they think with is package synth; starting a server is left to the
// caller.
package demo

import (
	"context"
	"errors"
	"net/http"
	"sync"
	"time"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/synth"
)

// Lead is who assigns, and reviews too.
const Lead = "rowan"

// Proofreaders are who claims and resolves; birch reviews as well.
var Proofreaders = []string{"alder", "birch", "cedar"}

// Roles are what everybody may do.
var Roles = map[string][]string{
	"alder": {"proofreader"}, "birch": {"proofreader", "reviewer"}, "cedar": {"proofreader"}, Lead: {"lead", "reviewer"},
}

// Team is who works, where, and on what they all agree in the end.
type Team struct {
	URL    string
	Volume string
	Tokens map[string]string // by handle
	Truth  map[uint64]uint64 // true neuron of each supervoxel
	Seed   uint64
	Tasks  int                   // for each proofreader
	Lapse  float64               // how many times faster than life they think
	Tell   func(done, total int) // hears of each resolved task; may be nil

	mu      sync.Mutex
	decided int
}

// assigned is how many of the best false merges the lead gives to the first proofreader.
const assigned = 5

// Work lets the team work through its tasks: the lead assigns some, the proofreaders claim, judge and resolve beside
// each other, and then the reviewers look at what they did. It returns when everything that was resolved is reviewed,
// as far as it can be, and the followers have caught up.
func (t *Team) Work(ctx context.Context) error {
	lead, err := t.member(Lead)
	if err != nil {
		return err
	}
	kind := fettle.TaskKind("false-merge")
	_, err = fettle.Read[fettle.Assigned](lead.api.AssignTasks(ctx, t.Volume, fettle.AssignRequest{
		To: Proofreaders[0], Best: &fettle.Best{Count: assigned, Kind: &kind}}))
	if err != nil {
		return err
	}
	if err := t.each(Proofreaders, func(m *member) error { return m.proofread(ctx) }); err != nil {
		return err
	}
	if err := t.each([]string{"birch", Lead}, func(m *member) error { return m.review(ctx) }); err != nil {
		return err
	}
	return lead.caughtUp(ctx)
}

// each lets some people work at the same time.
func (t *Team) each(handles []string, work func(*member) error) error {
	var wg sync.WaitGroup
	failed := make([]error, len(handles))
	for i, handle := range handles {
		m, err := t.member(handle)
		if err != nil {
			return err
		}
		wg.Go(func() { failed[i] = work(m) })
	}
	wg.Wait()
	return errors.Join(failed...)
}

// member is one person at work.
type member struct {
	*Team
	handle string
	api    *fettle.Client
	mind   *synth.Oracle // as this person judges
	second *synth.Oracle // as a careful reviewer does
}

func (t *Team) member(handle string) (*member, error) {
	api, err := fettle.NewClient(t.URL, fettle.WithRequestEditorFn(func(_ context.Context, req *http.Request) error {
		req.Header.Set("Authorization", "Bearer "+t.Tokens[handle])
		req.Header.Set("User-Agent", "simulation")
		return nil
	}))
	if err != nil {
		return nil, err
	}
	careful := synth.Habits{Person: handle, Seed: t.Seed, Median: 20 * time.Second}
	return &member{Team: t, handle: handle, api: api,
		mind: synth.NewOracle(t.Truth, synth.Habitual(handle, t.Seed)), second: synth.NewOracle(t.Truth, careful)}, nil
}

// think lets simulated time pass.
func (m *member) think(ctx context.Context, d time.Duration) error {
	select {
	case <-ctx.Done():
		return ctx.Err()
	case <-time.After(time.Duration(float64(d) / m.Lapse)):
		return nil
	}
}

// patience bounds the wait for followers.
const patience = 20 * time.Second

// caughtUp waits until findings and tasks have followed every entry.
func (m *member) caughtUp(ctx context.Context) error {
	for end := time.Now().Add(patience); ; {
		v, err := fettle.Read[fettle.Volume](m.api.GetVolume(ctx, m.Volume))
		if err != nil {
			return err
		}
		if v.TasksPosition >= v.Position {
			return nil
		}
		if time.Now().After(end) {
			return fault.Newf(fault.Busy, "followers-late", "the tasks of %s stand at entry %d of %d", m.Volume, v.TasksPosition, v.Position).
				WithNext("see the worker's log")
		}
		if err := m.think(ctx, time.Duration(0.1*float64(time.Second)*m.Lapse)); err != nil {
			return err
		}
	}
}
