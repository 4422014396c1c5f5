package api

import (
	"context"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

// ListVolumes lists the volumes.
func (s *Server) ListVolumes(ctx context.Context, _ ListVolumesRequestObject) (ListVolumesResponseObject, error) {
	list, err := s.Ledger.Volumes(ctx)
	return ListVolumes200JSONResponse{Items: each(list, func(v ledger.VolumeInfo) VolumeBrief { return VolumeBrief{Name: v.Name, Position: v.Position} })}, err
}

// GetVolume tells what was delivered, and how far everything has come.
func (s *Server) GetVolume(ctx context.Context, r GetVolumeRequestObject) (GetVolumeResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	head, err := v.Head(ctx)
	if err != nil {
		return nil, err
	}
	judged, err := triage.Position(ctx, s.Pool, v)
	if err != nil {
		return nil, err
	}
	queued, err := s.Queue.Position(ctx, v)
	if err != nil {
		return nil, err
	}
	i := v.Info()
	return GetVolume200JSONResponse{Name: i.Name, Position: head, TriagePosition: judged, TasksPosition: queued, Supervoxels: i.Supervoxels,
		BaseSegments: i.Segments, Contacts: i.Contacts, RejectedContacts: i.Rejected, AssumedLinks: i.Assumed, Synapses: i.Synapses, Nuclei: i.Nuclei,
		HasTruth: i.HasTruth, VoxelNm: i.VoxelNM[:], MinNm: toPoint(i.Bounds.Min), MaxNm: toPoint(i.Bounds.Max), Digest: i.Digest}, nil
}

// GetQuality compares with truth.
func (s *Server) GetQuality(ctx context.Context, r GetQualityRequestObject) (GetQualityResponseObject, error) {
	v, at, err := s.volumeAt(ctx, r.Volume, r.Params.At)
	if err != nil {
		return nil, err
	}
	q, err := triage.Score(ctx, v, at)
	if err != nil {
		return nil, err
	}
	return GetQuality200JSONResponse{Position: q.Position, SplitBits: q.Split, MergeBits: q.Merge, RandPrecision: q.Precision, RandRecall: q.Recall,
		RandError: q.Error, FalseMerges: q.FalseMerges, FalseSplits: q.FalseSplits, CountedLeast: triage.CountedLeast,
		ScoredVoxels: q.Scored, NotScoredVoxels: q.NotScored}, nil
}

// volumeAt opens a volume and reads the moment that is asked about.
func (s *Server) volumeAt(ctx context.Context, name string, at *string) (*ledger.Volume, ledger.At, error) {
	when, err := readAt(at)
	if err != nil {
		return nil, when, err
	}
	v, err := s.Ledger.Volume(ctx, name)
	return v, when, err
}
