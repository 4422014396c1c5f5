package base

import (
	"slices"
)

// kind is what a column holds.
type kind int

const (
	anID     kind = iota // any 64-bit number
	aCount               // a whole number
	aNumber              // a finite number
	someText             // UTF-8
)

// column is one column of a table. A cell of an optional column may be empty, and the column may be absent.
type column struct {
	name     string
	kind     kind
	optional bool
}

// table is one table of a delivery.
type table struct {
	name     string
	optional bool
	columns  []column
}

// The tables of a delivery. Columns are found by name, in any order.
var (
	supervoxelTable = &table{name: "supervoxels", columns: []column{
		{name: "supervoxel_id", kind: anID}, {name: "segment_id", kind: anID}, {name: "voxel_count", kind: aCount},
		{name: "x_nm", kind: aNumber}, {name: "y_nm", kind: aNumber}, {name: "z_nm", kind: aNumber},
		{name: "radius_nm", kind: aNumber, optional: true},
	}}
	contactTable = &table{name: "contacts", columns: []column{
		{name: "a_supervoxel_id", kind: anID}, {name: "b_supervoxel_id", kind: anID}, {name: "affinity", kind: aNumber},
		{name: "area_nm2", kind: aNumber, optional: true},
	}}
	synapseTable = &table{name: "synapses", columns: []column{
		{name: "synapse_id", kind: anID}, {name: "pre_supervoxel_id", kind: anID}, {name: "post_supervoxel_id", kind: anID},
		{name: "x_nm", kind: aNumber}, {name: "y_nm", kind: aNumber}, {name: "z_nm", kind: aNumber},
		{name: "confidence", kind: aNumber}, {name: "transmitter", kind: someText, optional: true},
	}}
	nucleusTable = &table{name: "nuclei", columns: []column{
		{name: "nucleus_id", kind: anID}, {name: "supervoxel_id", kind: anID},
		{name: "x_nm", kind: aNumber}, {name: "y_nm", kind: aNumber}, {name: "z_nm", kind: aNumber},
		{name: "volume_nm3", kind: aNumber},
	}}
	truthTable = &table{name: "truth", optional: true, columns: []column{
		{name: "supervoxel_id", kind: anID}, {name: "neuron_id", kind: anID},
	}}
	tables = []*table{supervoxelTable, contactTable, synapseTable, nucleusTable, truthTable}
)

// tableOrder puts problems into the order in which people look at a delivery.
func tableOrder(name string) int {
	return slices.IndexFunc(tables, func(t *table) bool { return t.name == name })
}

func (t *table) find(name string) int {
	return slices.IndexFunc(t.columns, func(c column) bool { return c.name == name })
}

func (t *table) columnName(c int) string {
	if c < 0 {
		return ""
	}
	return t.columns[c].name
}

// cell is one value of a row, in the field of its column's kind.
type cell struct {
	given  bool // false: an optional column that is absent or empty
	id     ID
	count  int64
	number float64
	text   string
}

// row is one line of a table.
type row struct {
	line   int64
	cells  []cell // by column of the table
	faults []cellFault
}

// cellFault is what cannot be read.
type cellFault struct {
	column int // of the table; -1 when it concerns the whole line
	value  string
	reason string
}

func (r *row) bad() bool { return len(r.faults) > 0 }

func (r *row) fault(column int, value, reason string) {
	r.faults = append(r.faults, cellFault{column, clip(value), reason})
}

// source yields the rows of one table.
type source interface {
	// next fills the row; false at the end. When no more can be read, the last row has a fault and says why.
	next(*row) bool
	// done tells how many bytes of the file have been used, for the progress bar.
	done() int64
	// odd tells, after the last row, what was unusual about the file.
	odd() []string
	close()
}
