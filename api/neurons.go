package api

import (
	"context"

	"fettle.example/fettle/ledger"
)

// ListNeurons lists the cells that are followed.
func (s *Server) ListNeurons(ctx context.Context, r ListNeuronsRequestObject) (ListNeuronsResponseObject, error) {
	v, at, err := s.volumeAt(ctx, r.Volume, r.Params.At)
	if err != nil {
		return nil, err
	}
	list, err := v.Neurons(ctx, at)
	if err != nil {
		return nil, err
	}
	page, next, err := pageOf(list, func(n ledger.Neuron) string { return n.Name }, r.Params.Cursor, r.Params.Limit)
	return ListNeurons200JSONResponse{Items: each(page, toNeuron), Next: next}, err
}

// AddNeuron follows another. Its anchor may be a point: the nearest supervoxel of the whole volume.
func (s *Server) AddNeuron(ctx context.Context, r AddNeuronRequestObject) (AddNeuronResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	const wholeVolume = 0
	anchor, err := seed(ctx, v, r.Body.Anchor, []ledger.ID{wholeVolume}, "anchor")
	if err != nil {
		return nil, err
	}
	n, err := v.AddNeuron(ctx, r.Body.Name, anchor, caller(ctx).Handle)
	return AddNeuron201JSONResponse(toNeuron(n)), err
}

// GetNeuron tells where a neuron is.
func (s *Server) GetNeuron(ctx context.Context, r GetNeuronRequestObject) (GetNeuronResponseObject, error) {
	v, at, err := s.volumeAt(ctx, r.Volume, r.Params.At)
	if err != nil {
		return nil, err
	}
	n, err := v.Neuron(ctx, r.Name, at)
	return GetNeuron200JSONResponse(toNeuron(n)), err
}

// GetNeuronHistory lists the entries that changed the anchor's segment.
func (s *Server) GetNeuronHistory(ctx context.Context, r GetNeuronHistoryRequestObject) (GetNeuronHistoryResponseObject, error) {
	v, at, err := s.volumeAt(ctx, r.Volume, nil)
	if err != nil {
		return nil, err
	}
	n, err := v.Neuron(ctx, r.Name, at)
	if err != nil {
		return nil, err
	}
	list, err := v.AnchorEntries(ctx, n.Anchor)
	if err != nil {
		return nil, err
	}
	page, err := historyPage(list, r.Params.Cursor, r.Params.Limit)
	return GetNeuronHistory200JSONResponse(page), err
}
