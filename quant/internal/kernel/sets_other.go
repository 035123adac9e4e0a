//go:build !amd64 || purego

package kernel

// assembly tells that this build has kernels in assembly.
const assembly = false

// supported returns the sets that this build has.
func supported() []*Set { return []*Set{Portable} }
