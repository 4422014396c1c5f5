// Package base holds what the segmentation said about a volume: read once from a delivery, packed into blocks,
// never changed again.
//
// # What it promises
//
//   - [Import] stores a delivery whole or not at all: everything is checked before anything is stored, all of it
//     goes into the database in one transaction, and a refusal names table, line, column, value and reason.
//   - Ids are any 64-bit numbers and come back exactly; none passes through a floating-point number.
//   - The same rows give the same base and the same digest, in whatever order and format they were delivered.
//   - [Base] is immutable and safe for concurrent use. Its blocks never change, so they are cached freely.
//
// # Ordinals
//
// Inside, a supervoxel is a dense ordinal. Base segments stand one after the other, and within one segment stands
// the preorder of a spanning tree of its strongest contacts, so that a subtree (which is what a split usually
// takes away) is one range of ordinals. layout.go says how. Ordinals belong to one import: they never leave the
// server, and whoever stores something for longer than a process stores supervoxel ids.
//
// # Files
//
// Delivery: table.go (what the tables are), cell.go (what a value may be), csv.go and parquet.go (how they are read), ahead.go
// (in a goroutine of its own), describe.go (volume.json), problem.go (what was wrong). Import: import.go (reading and
// checking), supervoxels.go, contacts.go, synapses.go, extsort.go, arrange.go, layout.go and connect.go (ordinals), store.go,
// digest.go. Blocks: pack.go, planes.go, geometry.go, touch.go, segments.go. Reading: base.go, index.go, cache.go, view.go,
// totals.go, nearest.go.
//
// # What it leaves to others
//
// What people said since (package ledger), and any opinion about what is suspicious (package triage).
package base
