//go:build !amd64 || purego

package kernel

// supported returns the sets that this build has.
func supported() []*Set { return []*Set{Portable} }
