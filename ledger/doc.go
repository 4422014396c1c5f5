// Package ledger keeps the truth of a volume: what the segmentation said, which never changes (package
// [fettle.example/fettle/ledger/base]), and what people said about it, entry by entry, which is never erased.
//
// # What it promises
//
//   - Positions of a volume are 1, 2, 3 … without a gap, and an entry once posted stays as it is: the database
//     refuses to change or remove it.
//   - The accepted contacts at position n are those inside base segments, plus the links of merges, minus the
//     cuts of splits, with reversals applied, for entries 1 … n. The segments at n are their connected components.
//     Everything else that the tables say is a cache of that, and [Volume.Reconcile] recomputes it.
//   - A segment id names exact content. Every entry retires the segments it changes and mints new ids that were
//     never used. So a request names the ids it saw, and if one is retired meanwhile the answer is a [StaleError].
//   - A posted entry is durable before its caller hears of it, and the entry's own id makes a repeat harmless.
//
// # How it is read
//
// [Ledger] opens volumes. [Volume] is one of them: read.go and history.go answer questions at any position,
// plan.go, split.go and reverse.go turn a [Draft] into the exact change it would make, post.go and write.go append it,
// state.go holds who is where, catchup.go brings it up to what other processes posted, and reconcile.go, replay.go and
// tables.go hold the tables against base and entries.
// Costs: an edit costs by its smaller side; memory is about 13 bytes a supervoxel for the base's index and
// some 100 bytes a piece for the edits.
//
// # What it leaves to others
//
// It knows none of its readers. Triage, tasks and event streams follow it: each remembers the position it has
// reached and reads the entries after it. The NOTIFY on channel "fettle_entry" is only their alarm clock.
package ledger
