// Package tasks is the work of people: what is waiting to be looked at, who looks at it, how it ended, who agreed.
//
// It promises, by rules that the database itself holds:
//
//   - a task is in the hands of one person at most, and so is each segment;
//   - nobody reviews their own work;
//   - an outcome "corrected" is stored together with its entry in the ledger, or not at all;
//   - a claim that ran out can't touch the work of whoever claimed the task after it;
//   - every change of a task's state leaves a line in its history.
//
// Tasks come from triage's places and follow the ledger: an entry that answers a task before it was resolved
// overtakes it, and one that only renames its segments carries it along.
//
// What is suspicious and how urgent it is are triage's business; what segments hold is the ledger's. Nothing here
// knows of HTTP. What the package tells about people (who, when, how fast, how often agreed with) is personal data.
package tasks
