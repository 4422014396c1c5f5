// Package cut divides graphs: minimum cuts between two groups of vertices,
// bridges, connected pieces, and the smaller side after a deletion.
//
// It promises answers that depend on the graph and the question alone: never
// on the order of the edges, the search that happened to finish first, or
// chance. A minimum cut comes with its own proof, for the flow found (a lower
// bound of every cut) equals the summed capacity of the contacts returned (an
// upper bound of the least).
//
// Vertices are 0..n-1. What they stand for, where they are, and whether a cut
// is wise is left to the caller: the package reads nothing and writes nothing.
package cut
