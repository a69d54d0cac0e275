// Package photometry works out how much light is left: the flux of a lamp or LED as it ages, dirt on luminaires and
// surfaces, the maintained illuminance of a space and when it falls below what is required.
//
// Times of burning are hours, times of dirt are years since the last cleaning; the two clocks are kept apart, because
// a lamp is changed without cleaning and cleaned without changing. Nothing is projected beyond what its source allows:
// past its cap an answer says so and gives no date.
package photometry
