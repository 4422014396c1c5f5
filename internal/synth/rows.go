package synth

// Rows is a delivery in memory. Ids are whole 64-bit numbers.
type Rows struct {
	Name        string
	Supervoxels []Supervoxel
	Contacts    []Contact
	Synapses    []Synapse
	Nuclei      []Nucleus
}

// Supervoxel is a row of table supervoxels, with the true neuron it belongs to.
type Supervoxel struct {
	ID, Segment uint64
	Voxels      int64
	X, Y, Z     float64 // nm
	Radius      float64 // nm; 0: not delivered
	Neuron      uint64  // 0: none
}

// Contact is a row of table contacts.
type Contact struct {
	A, B     uint64
	Affinity float64
	Area     float64 // nm²
}

// Synapse is a row of table synapses.
type Synapse struct {
	ID, Pre, Post uint64
	X, Y, Z       float64 // nm
	Confidence    float64
	Transmitter   string
}

// Nucleus is a row of table nuclei.
type Nucleus struct {
	ID, Supervoxel uint64
	X, Y, Z        float64 // nm
	Volume         float64 // nm³
}
