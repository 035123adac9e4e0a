//go:build !purego

package kernel

import "golang.org/x/sys/cpu"

// AVX2 and AVX512 are the sets of kernels in assembly.
var (
	AVX2 = &Set{
		Name:   "avx2",
		single: family[float32]{width: widthAVX232, narrow: narrowAVX232, tiles: tilesAVX232},
		double: family[float64]{width: widthAVX264, narrow: narrowAVX264, tiles: tilesAVX264},
		loops: loops{
			measure: measureAVX2, widen: widenAVX2, interleave: interleaveAVX2, transpose: transposeAVX2,
			copyColumns: copyColumnsAVX2, gatherColumns: gatherColumnsAVX2,
			addNative: addNativeAVX2, addNearest: addNearestAVX2, addOdd: addOddAVX2, fetch: fetchAVX2, philox: philoxAVX2,
			philoxStream: philoxStreamAVX2, roundNearest32: roundNearest32AVX2, roundStochastic32: roundStochastic32AVX2,
			roundNearest64: roundNearest64AVX2, roundStochastic64: roundStochastic64AVX2, scale64: scale64AVX2, add64: add64AVX2,
		},
	}
	AVX512 = &Set{
		Name:   "avx512",
		single: family[float32]{width: widthAVX51232, narrow: narrowAVX51232, tiles: tilesAVX51232},
		double: family[float64]{width: widthAVX51264, narrow: narrowAVX51264, tiles: tilesAVX51264},
		loops: loops{
			measure: measureAVX512, widen: widenAVX512, interleave: interleaveAVX512, transpose: transposeAVX512,
			copyColumns: copyColumnsAVX512, gatherColumns: gatherColumnsAVX512,
			addNative: addNativeAVX512, addNearest: addNearestAVX512, addOdd: addOddAVX512, fetch: fetchAVX512, philox: philoxAVX512,
			philoxStream: philoxStreamAVX512, roundNearest32: roundNearest32AVX512, roundStochastic32: roundStochastic32AVX512,
			roundNearest64: roundNearest64AVX512, roundStochastic64: roundStochastic64AVX512, scale64: scale64AVX512, add64: add64AVX512,
		},
	}
)

// assembly tells that this build has kernels in assembly.
const assembly = true

// supported returns the sets that the processor can run, the fastest first.
func supported() []*Set {
	sets := []*Set{Portable}
	if cpu.X86.HasAVX2 && cpu.X86.HasFMA {
		sets = append([]*Set{AVX2}, sets...)
		if cpu.X86.HasAVX512F && cpu.X86.HasAVX512BW && cpu.X86.HasAVX512DQ && cpu.X86.HasAVX512VL {
			sets = append([]*Set{AVX512}, sets...)
		}
	}
	return sets
}
