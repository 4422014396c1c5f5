package tasks

import "testing"

// Every rule of the queue is held by the database, whoever is connected: here somebody with a SQL prompt.

func TestTheDatabaseAllowsOneLiveClaimATask(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	b.take(alder)
	b.refused("claim_one_a_task", `
		insert into claim (claim_id, volume_id, number, person, until) values ($1, $2, 1, 'birch', now() + interval '1 hour')`, newID(t), b.volume)
}

func TestTheDatabaseAllowsOneLiveClaimAPersonAndVolume(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 10), place(1, 20))
	b.take(alder)
	b.refused("claim_one_a_person", `
		insert into claim (claim_id, volume_id, number, person, until) values ($1, $2, 2, 'alder', now() + interval '1 hour')`, newID(t), b.volume)
}

func TestTheDatabaseAllowsOneLeaseASegment(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 10, 20), place(1, 20, 30))
	b.take(alder)
	id := newID(t)
	if _, err := b.pool.Exec(t.Context(), `
		insert into claim (claim_id, volume_id, number, person, until) values ($1, $2, 2, 'birch', now() + interval '1 hour')`, id, b.volume); err != nil {
		t.Fatal(err)
	}
	b.refused("lease_one_a_segment", `insert into lease (volume_id, segment_id, claim_id) values ($1, 20, $2)`, b.volume, id)
	// And without a lease on each of its segments a task can't be claimed at all.
	if _, err := b.pool.Exec(t.Context(), `insert into lease (volume_id, segment_id, claim_id) values ($1, 30, $2)`, b.volume, id); err != nil {
		t.Fatal(err)
	}
	b.refused("task_step", `update task set state = 'claimed', claim_id = $2 where volume_id = $1 and number = 2`, b.volume, id)
	if _, err := b.pool.Exec(t.Context(), `delete from lease where claim_id = $1`, id); err != nil {
		t.Fatal(err)
	}
	if _, err := b.pool.Exec(t.Context(), `update claim set ended = 'released', ended_at = now() where claim_id = $1`, id); err != nil {
		t.Fatal(err)
	}
}

func TestTheDatabaseWantsAnEntryForACorrection(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	task := b.take(alder)
	b.refused("claim_corrected", `update claim set ended = 'resolved', ended_at = now(), outcome = 'corrected' where claim_id = $1`, task.Claim.ID)
	b.refused("claim_entry", `
		update claim set ended = 'resolved', ended_at = now(), outcome = 'corrected', position = 1 where claim_id = $1`, task.Claim.ID)
	b.refused("claim_corrected", `select claim_resolve($1, 'alder', 'corrected', '', null, null)`, task.Claim.ID)
	b.refused("claim_outcome", `update claim set ended = 'resolved', ended_at = now(), outcome = 'done' where claim_id = $1`, task.Claim.ID)
}

func TestTheDatabaseLetsNobodyReviewTheirOwnWork(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	task := b.end(birch, b.take(birch), Sound)
	b.refused("review_not_own", `
		insert into review (claim_id, person, verdict, note, volume_id) values ($1, 'birch', 'accept', '', $2)`, task.Claim.ID, b.volume)
	b.refused("review_not_own", `select task_review($1, 1, 'birch', 'accept', '', null, null)`, b.volume)
	b.refused("review_verdict", `
		insert into review (claim_id, person, verdict, note, volume_id) values ($1, 'cedar', 'shrug', '', $2)`, task.Claim.ID, b.volume)
}

func TestTheDatabaseKnowsThePeople(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	b.refused("claim_person_fkey", `
		insert into claim (claim_id, volume_id, number, person, until) values ($1, $2, 1, 'oak', now() + interval '1 hour')`, newID(t), b.volume)
	b.refused("task_assigned_to_fkey", `update task set assigned_to = 'oak'`)
	b.refused("person_stays", `delete from person where handle = 'alder'`)
	b.refused("person_roles", `update person set roles = '{captain}' where handle = 'alder'`)
	b.refused("person_handle", `insert into person (handle, roles) values ('Oak Tree', '{}')`)
}

func TestTheDatabaseKeepsTheHistory(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	task := b.end(alder, b.take(alder), Sound)
	if _, _, err := b.Review(t.Context(), ganglion, task.Number, cedar, Accept, ""); err != nil {
		t.Fatal(err)
	}
	for _, sql := range []string{
		`update task_event set person = 'birch'`, `delete from task_event`, `truncate task_event`,
		`update review set verdict = 'return'`, `delete from review`, `delete from claim`, `delete from task`,
	} {
		b.refused("history_is_final", sql)
	}
	b.refused("claim_live", `update claim set note = 'I never did that' where claim_id = $1`, task.Claim.ID)
}

func TestTheDatabaseTakesNoHalfTask(t *testing.T) {
	t.Parallel()
	b := newBench(t)
	const insert = `insert into task (volume_id, number, priority, kind, family, segments) values ($1, 1, `
	b.refused("task_segments", insert+`1, 'false-merge', 'size', '{}')`, b.volume)
	b.refused("task_segments", insert+`1, 'false-merge', 'size', '{null}')`, b.volume)
	b.refused("task_kind", insert+`1, 'odd', 'size', '{1}')`, b.volume)
	b.refused("task_worth", insert+`'NaN', 'false-merge', 'size', '{1}')`, b.volume)
	b.refused("task_step", `
		insert into task (volume_id, number, priority, kind, family, segments, state) values ($1, 1, 1, 'false-merge', 'size', '{1}', 'resolved')`, b.volume)
}

// The state machine: from each state, a bare UPDATE to each other. The one step that needs nothing else to have
// happened is that an open task is overtaken; all others are refused without their claim, outcome or review.
func TestNoStepWithoutItsReason(t *testing.T) {
	t.Parallel()
	states := []string{Open, Claimed, Resolved, Accepted, Returned, Overtaken}
	reach := map[string]func(b *bench){
		Open:      func(*bench) {},
		Claimed:   func(b *bench) { b.take(alder) },
		Resolved:  func(b *bench) { b.end(alder, b.take(alder), Sound) },
		Accepted:  func(b *bench) { b.end(alder, b.take(alder), Sound); b.judge(cedar, 1, Accept) },
		Returned:  func(b *bench) { b.end(alder, b.take(alder), Sound); b.judge(cedar, 1, Return) },
		Overtaken: func(b *bench) { b.overtake(1) },
	}
	for _, from := range states {
		t.Run(from, func(t *testing.T) {
			t.Parallel()
			b := newBench(t, place(1, 10))
			reach[from](b)
			if got := b.read(1).State; got != from {
				t.Fatalf("the task is %s", got)
			}
			for _, to := range states {
				if to == from || from == Open && to == Overtaken {
					continue
				}
				b.refused("task_step", `update task set state = $1 where number = 1`, to)
			}
		})
	}
}
