// Package burnhours turns what a meter sends into hours of burning: counters of hours, on and off states, and energy.
//
// Every result is a list of intervals between readings, each with a point value and the bounds within which the truth
// lies. An interval never holds more burning than time. What a meter did not see is told as unknown: its lower bound
// is 0 and its upper bound the time that passed. Times are instants; a day is a local day of the building's own
// calendar, which has 23 or 25 hours where the clock changes.
package burnhours
