package retrofit

import "strings"

func f64(x float64) *float64 { return &x }
func integer(n int) *int     { return &n }
func yes() *bool             { b := true; return &b }
func no() *bool              { b := false; return &b }

func contains(s, part string) bool { return strings.Contains(s, part) }
