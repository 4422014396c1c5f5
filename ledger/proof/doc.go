// Package proof makes bytes that can be hashed, and hashes that can be checked: canonical JSON (RFC 8785), the Merkle tree
// of RFC 6962, signed checkpoints of it (C2SP tlog-checkpoint), and the form of an exported ledger. It knows no database and no
// server, so that anybody can check an export with it: [VerifyLog] looks at every byte.
//
// What an entry's bytes say, and where hashes are kept, is the ledger's matter; that the same value always gives the same
// bytes, and that a tree's head can't be had from other leaves, is this package's.
package proof
