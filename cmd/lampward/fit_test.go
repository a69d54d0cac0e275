package main

import (
	"math"
	"strings"
	"testing"
)

// FuzzLivesFile: whatever a file holds, it is read whole or refused, and no life in it is impossible.
func FuzzLivesFile(f *testing.F) {
	for _, s := range []string{"lower,upper\n1,1\n2,\n", "upper,lower,count,entry\n3,0,2,\n", "lower,upper\n1,0\n", "\ufefflower,upper\n1e3,NaN\n", "lower\n", "\"", "lower,upper,lower\n"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		lives, err := readLives(strings.NewReader(text))
		for _, l := range lives {
			if err != nil || !(l.Lower >= 0 && l.Upper >= l.Lower && l.Entry >= 0 && l.Count > 0) || math.IsInf(l.Lower, 0) {
				t.Errorf("%q gives %+v, %v", text, l, err)
			}
		}
	})
}
