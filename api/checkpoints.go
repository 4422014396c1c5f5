package api

import (
	"context"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/proof"
)

// GetCheckpoint tells the newest signed checkpoint.
func (s *Server) GetCheckpoint(ctx context.Context, r GetCheckpointRequestObject) (GetCheckpointResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	c, err := v.LastCheckpoint(ctx)
	return GetCheckpoint200JSONResponse(toCheckpoint(c)), err
}

// MakeCheckpoint signs what there is now.
func (s *Server) MakeCheckpoint(ctx context.Context, r MakeCheckpointRequestObject) (MakeCheckpointResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	c, err := v.Checkpoint(ctx)
	return MakeCheckpoint200JSONResponse(toCheckpoint(c)), err
}

func toCheckpoint(c ledger.Checkpoint) Checkpoint {
	return Checkpoint{Origin: c.Origin, Size: c.Size, Root: c.Root.String(), Note: c.Note, MadeAt: c.At.UTC()}
}

// GetCheckpointKey tells the public key.
func (s *Server) GetCheckpointKey(ctx context.Context, r GetCheckpointKeyRequestObject) (GetCheckpointKeyResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	key, err := v.PublicKey(ctx)
	return GetCheckpointKey200JSONResponse{Key: key}, err
}

// ProveInclusion proves that an entry is in the tree.
func (s *Server) ProveInclusion(ctx context.Context, r ProveInclusionRequestObject) (ProveInclusionResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	p, err := v.ProveEntry(ctx, r.Params.Position, value(r.Params.Size))
	return ProveInclusion200JSONResponse(toProof(p)), err
}

// ProveConsistency proves that the tree grew and did not change.
func (s *Server) ProveConsistency(ctx context.Context, r ProveConsistencyRequestObject) (ProveConsistencyResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	p, err := v.ProveGrowth(ctx, r.Params.Older, value(r.Params.Size))
	return ProveConsistency200JSONResponse(toProof(p)), err
}

func toProof(p ledger.Proof) Proof {
	return Proof{Size: p.Size, Root: p.Root.String(), Path: each(p.Path, func(h proof.Hash) string { return h.String() })}
}
