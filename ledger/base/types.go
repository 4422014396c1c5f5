package base

// Point is a place in nm: x, y, z. Stored points are rounded to whole nm.
type Point [3]float64

// Bounds is a box in nm, both corners included.
type Bounds struct{ Min, Max Point }

// Range is the ordinals Lo, Lo+1 … Hi-1. Lists of ranges are ascending and do not overlap.
type Range struct{ Lo, Hi uint32 }

// Len is the number of ordinals in the range.
func (r Range) Len() int { return int(r.Hi - r.Lo) }

// Seam is the plane where two slabs were joined again: Axis is 0, 1 or 2 for x, y or z.
type Seam struct {
	Axis int
	AtNM float64
}

// Gap is a stretch of missing or unusable images across an axis.
type Gap struct {
	Axis         int
	FromNM, ToNM float64
}

// Info describes a volume as it was delivered.
type Info struct {
	VolumeID    int32
	Name        string
	VoxelNM     [3]float64
	Bounds      Bounds
	Seams       []Seam
	Gaps        []Gap
	Supervoxels int64
	Segments    int64 // base segments
	Contacts    int64 // distinct pairs delivered, accepted and rejected
	Rejected    int64 // those of them between two base segments
	Assumed     int64 // links added because a base segment's contacts did not connect it
	Synapses    int64
	Nuclei      int64
	Truth       int64 // supervoxels whose true neuron was delivered, for scoring
	HasTruth    bool
	Digest      string // SHA-256 of the content, lower-case hex; digest.go says of what
	MintFrom    ID     // start of a wide run of ids that were not delivered
	Layout      int32  // version of the order and the block format
}

// Totals sums up some supervoxels.
type Totals struct {
	Supervoxels, Voxels     int64
	SynapsesIn, SynapsesOut int64 // post side here, pre side here
	Nuclei                  int64
	Min, Max                Point // of the supervoxels' points, nm; zero when there are none
}

// Segment is a base segment.
type Segment struct {
	ID      ID
	Lo, Hi  uint32 // its ordinals
	Totals  Totals
	Assumed int // links added to connect it
}

// View is a set of supervoxels loaded whole, usually one segment. Index i of every slice is the supervoxel with
// the i-th smallest ordinal.
type View struct {
	Segment  ID    // filled in by the ledger
	Position int64 // likewise: the ledger position at which this was the segment

	VoxelNM [3]float64
	Bounds  Bounds // of the volume
	Seams   []Seam
	Gaps    []Gap

	Ordinals []uint32
	IDs      []ID
	Points   []Point
	Voxels   []int64
	Radius   []float64 // nm; where none was delivered, that of a ball of the same volume

	Contacts []Contact // accepted contacts and links with both ends here, each once, by (A, B)
	Outside  []Outside // contacts with one end here, by (At, Other)
	Synapses []Synapse // by (At, Out, ID); one with both sides here appears twice
	Nuclei   []Nucleus // by (At, ID)
}

// Contact joins two supervoxels of a view: A < B are indexes.
type Contact struct {
	A, B     int32
	Affinity float64 // belief that both are one cell, 0..1, in steps of 1/256; 0 when assumed or a link
	Area     float64 // touching area in nm², within 5 %; 0 when not delivered
	Assumed  bool    // not delivered: added at import so that the base segment hangs together
	Link     bool    // made by a person's merge; filled in by the ledger
}

// Outside is a contact whose other end is not in the view.
type Outside struct {
	At           int32 // index of the end that is
	Other        uint32
	OtherID      ID
	OtherSegment ID // the segment that holds it now; filled in by the ledger
	Affinity     float64
	Area         float64 // nm²; 0 when not delivered
	Accepted     bool    // the agglomeration had accepted it, so somebody's split cut it; else it was rejected
	Assumed      bool    // such an accepted one that was added at import
}

// Synapse is one side of a synapse: the side that is in the view.
type Synapse struct {
	ID          ID
	At          int32
	Out         bool   // the pre side is here: output; else input
	Other       uint32 // ordinal of the other side
	Point       Point
	Confidence  float64 // 0..1
	Transmitter string  // "" when not delivered
}

// Nucleus is a cell nucleus and the supervoxel that holds it.
type Nucleus struct {
	ID        ID
	At        int32
	Point     Point
	VolumeNM3 float64
}

// Len is the number of supervoxels.
func (v *View) Len() int { return len(v.Ordinals) }

// Arc is one end's look along a contact.
type Arc struct {
	To      int32 // index of the neighbour
	Contact int32 // index into Contacts
}

// Adjacency lists each supervoxel's contacts: those of i are arcs[start[i]:start[i+1]], ascending by To.
func (v *View) Adjacency() (start []int32, arcs []Arc) {
	n := v.Len()
	start = make([]int32, n+1)
	for _, c := range v.Contacts {
		start[c.A+1]++
		start[c.B+1]++
	}
	for i := range n {
		start[i+1] += start[i]
	}
	arcs = make([]Arc, 2*len(v.Contacts))
	next := make([]int32, n)
	copy(next, start)
	// Contacts stand by (A, B): first the ends that look down, in order of A, then those that look up, in order of B.
	for k, c := range v.Contacts {
		arcs[next[c.B]] = Arc{To: c.A, Contact: int32(k)}
		next[c.B]++
	}
	for k, c := range v.Contacts {
		arcs[next[c.A]] = Arc{To: c.B, Contact: int32(k)}
		next[c.A]++
	}
	return start, arcs
}
