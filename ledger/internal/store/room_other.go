//go:build !linux && !darwin

package store

// room has nothing to ask where a mapped file is given all its space when it is made.
func room(string, int) error { return nil }
