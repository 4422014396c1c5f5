// Package stats computes published statistics: outliers, intervals, handling times with censoring, agreement of two
// partitions. Its functions are pure; each names its source, and its test a value from outside the project.
//
// An undefined statistic is absent (ok is false), never NaN and never 0.
package stats
