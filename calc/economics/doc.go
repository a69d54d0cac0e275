// Package economics compares what ways of keeping lights burning cost: one by one, in groups, by age, now or later,
// alone or joined with other work, and whether new gear pays.
//
// Money is a plain number here, in whatever single currency its caller keeps; nothing is converted. What is not known
// stays unknown: a sum that needs it is not made.
package economics
