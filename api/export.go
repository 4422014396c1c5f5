package api

import (
	"context"
	"io"
)

// ExportLedger streams the ledger as it is read. When reading fails half-way the answer breaks off, and has no last checkpoint, so
// that whoever verifies it sees that it is not whole.
func (s *Server) ExportLedger(ctx context.Context, r ExportLedgerRequestObject) (ExportLedgerResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	if _, err := v.Checkpoint(ctx); err != nil { // a refusal to sign is told before the answer begins
		return nil, err
	}
	out, in := io.Pipe()
	context.AfterFunc(ctx, func() { out.CloseWithError(context.Cause(ctx)) }) // ends the writer when nobody reads any more
	go func() { in.CloseWithError(v.Export(ctx, in)) }()
	return ExportLedger200ApplicationjsonlResponse{Body: out}, nil
}

// GetProvenance tells the ledger in the words of W3C PROV.
func (s *Server) GetProvenance(ctx context.Context, r GetProvenanceRequestObject) (GetProvenanceResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	p, err := v.Provenance(ctx)
	return GetProvenance200JSONResponse(p), err
}
