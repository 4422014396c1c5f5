// Package synth invents volumes: deliveries with true neurons behind them, so that errors are known and a simulated
// proofreader can be right. The same seed always gives the same files.
//
// It is for the demonstration and for tests. Nothing in it is real, and no detector may be tuned to it.
package synth
