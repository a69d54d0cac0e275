// Package loading compares what is connected with what may be connected: a driver, a dimmer, a circuit and an
// output cable each have a window, and the lamps behind them make a load.
//
// The package also holds the words every other package uses for lighting gear. A nameplate (Lamp, Gear, Control,
// Fitting) is what a model states about itself; facts (CircuitFacts, DriverFacts, DimmerFacts, FixtureFacts) are
// what somebody saw at one place. Both are embedded in the records that are stored and sent, so there is one name
// for a thing in the arithmetic, the schema and the interface.
//
// Three answers, not two: a nil pointer, a nil slice and an empty string mean that nobody looked. A zero, an empty
// slice, false and the word "none" mean that somebody looked and there is none. What nobody looked at never passes
// a check.
package loading
