// Package forecast tells how many units will fail, when, with what limits, and how many to keep on the shelf.
//
// A count of failures is a distribution, not a number: places fail independently once the life of their kind is given, and
// that life is itself known only as well as the data allow, so that every limit mixes over the lives they leave possible.
package forecast
