// Package proof makes bytes that can be hashed, and hashes that can be checked: canonical JSON (RFC 8785), the Merkle tree
// of RFC 6962, and signed checkpoints of it (C2SP tlog-checkpoint). It reads nothing and writes nothing, so that anybody can
// check an export with it, without a server.
//
// What an entry's bytes say, and where hashes are kept, is the ledger's matter; that the same value always gives the same
// bytes, and that a tree's head can't be had from other leaves, is this package's.
package proof
