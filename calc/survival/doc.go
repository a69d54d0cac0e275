// Package survival learns how long units live from what is known of them: failures at an age, failures found between two
// looks, units that still work, and units that were already old when they were first seen.
//
// Time is hours of burning unless the caller keeps another, the same throughout. Where the data cannot answer, a function
// fails with an error that says why; nothing is ever NaN.
package survival
