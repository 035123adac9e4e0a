// Package store keeps runs and claims in one bbolt file. It is the only package
// that knows bbolt.
//
// # What is in the file
//
// The file holds seven buckets at its root; all records are CBOR (RFC 8949, core
// deterministic encoding) with integer keys, so that a field may be renamed but
// its number never reused.
//
//	ulpine    "version": the version of this layout
//	runs      key (32 bytes)                        -> summary of the run
//	parts     key, part (3 bytes), piece (4 bytes)  -> at most 61,312 bytes of the part
//	marks     key                                   -> who started this run, and when
//	studies   study (32 bytes)                      -> title, claim as fixed, time
//	index     study, replicate (8 bytes), slug      -> key and place of the arm in the plan
//	data      what data was asked for (32 bytes)    -> SHA-256 of the examples
//
// Integers inside bucket keys are big-endian, so that bbolt's byte order is
// their order. Parts of a run are its record (R), the losses of its steps (S),
// its initial (I) and final (F) tensors and, neither in the digest, what
// diagnostics found (D) if it was looked at closer and what it said of every test
// example (P, compressed; see packed); numbers among tensors and losses are
// little-endian as in the digest. Values stay below 64 kB because bbolt keeps
// each in one run of pages, which it copies whole on every change nearby.
//
// # Names, keys and studies
//
// A run is stored once under its key, which says what was asked for. What a run
// is called (arm/replicate) belongs to a study: two arms with the same
// arithmetic, and two plans that share an arm, point to one run. The caller
// says what identifies a study; the store only keeps its claim and its names.
//
// The key of a run holds the hash of its data. Which data came of which request
// is noted, so that a plan's keys can be known without drawing all its data
// again. AddRuns notes it together with the names of runs on that data, before
// any of them; where nothing is noted, nothing was run.
//
// # The claim
//
// Fix writes a study's claim, its SHA-256 and the time before the first run; a
// second Fix of the same study leaves them as they are. Claim returns what was
// fixed and says how the claim of today differs. A study that finds runs of its
// arms in the store already (run for another study) is told how many, and
// which other claims were fixed over them.
//
// # States
//
// Begin marks a run before it starts and Put takes the mark away together with
// storing the run. A mark that this Store wrote reads *in flight*, one left over
// by a process that has gone reads *broken off*. The store is written by one
// process at a time; a reader that finds it held reads a copy of its last
// committed state, in which the marks of a process that still runs are *in flight*.
//
// # Safety
//
// All writing is done by one goroutine, which commits whatever has queued up in
// one transaction: the cost of a commit is its two waits for the disk, whatever
// its size. A commit that returned is on disk; a process that dies loses the
// runs in flight and nothing else. Open looks at the file's own index before it
// hands it to bbolt, which would panic on a file that was cut short, and turns
// any panic or memory fault of bbolt into ErrDamaged. Get recomputes the digest
// of what it read. A store must lie on a local disk: network file systems may
// neither lock nor map it reliably.
package store
