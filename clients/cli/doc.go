// Package cli is the library behind fettle, the command of proofreaders, reviewers, leads and auditors.
//
// It promises that
//
//   - it speaks to a server through package fettle.example/fettle/clients/fettle alone, so it can do nothing that the
//     API cannot;
//   - every list and record can be had as a table, as JSON (what the API answered) or as CSV; a table is drawn on a
//     terminal and is tab-separated lines anywhere else;
//   - a command that changes something makes one idempotency key and keeps it through every repeat, so a connection
//     lost in the middle never posts or claims twice;
//   - nothing is corrected unseen: a correction names the segments that it was shown, and asks first, or takes --yes;
//   - a failure says what happened and what to do next, on standard error, and its exit code says of which sort it is
//     (exit.go).
//
// It leaves rules to the server. One file holds the commands of one noun.
package cli
