package store

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"math"

	"github.com/fxamacker/cbor/v2"
	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

// pieceSize is the largest value in bytes. A page of bbolt takes at least two
// values; with their headers two of this size fill 30 pages of 4 kB.
const pieceSize = 15*4096 - 128

var (
	encoder = must(encodeOptions().EncMode())
	decoder = must(cbor.DecOptions{MaxArrayElements: math.MaxInt32, MaxMapPairs: math.MaxInt32}.DecMode())
)

// encodeOptions are those of RFC 8949, section 4.2.1 (core deterministic
// encoding); times are written in words to the nanosecond.
func encodeOptions() cbor.EncOptions {
	o := cbor.CoreDetEncOptions()
	o.Time = cbor.TimeRFC3339NanoUTC
	return o
}

func must[T any](mode T, err error) T {
	if err != nil {
		panic("store: " + err.Error())
	}
	return mode
}

func encode(v any) ([]byte, error)   { return encoder.Marshal(v) }
func decode(raw []byte, v any) error { return decoder.Unmarshal(raw, v) }

// part names one byte string of a run: its kind and, of tensors, which.
type part struct {
	kind  byte
	index uint16
}

// The kinds of part.
const (
	kindRecord  = 'R'
	kindSteps   = 'S'
	kindInitial = 'I'
	kindFinal   = 'F'
	kindLook    = 'D' // findings of diagnostics

	kindPredictions = 'P'
)

// prefix is the bucket key of the part's pieces without the piece's number.
func (p part) prefix(key results.Hash) []byte {
	out := append(make([]byte, 0, 39), key[:]...)
	out = append(out, p.kind)
	return binary.BigEndian.AppendUint16(out, p.index)
}

// encodedRun is a run taken apart, ready to be written.
type encodedRun struct {
	summary []byte
	parts   map[part][]byte
}

// encodeRun takes a run apart. It does not alter the run.
func encodeRun(r *results.Run) (encodedRun, error) {
	e := encodedRun{parts: map[part][]byte{}}
	record := *r
	record.StepBytes, record.Looked, record.Kept = nil, r.Findings != nil, r.Predictions != nil
	record.Started = record.Started.UTC()
	var err error
	if record.Initial, err = e.tensors(kindInitial, r.Initial); err != nil {
		return e, err
	}
	if record.Final, err = e.tensors(kindFinal, r.Final); err != nil {
		return e, err
	}
	e.parts[part{kind: kindSteps}] = results.RealBytes(r.Steps)
	if r.Findings != nil {
		if e.parts[part{kind: kindLook}], err = encode(r.Findings); err != nil {
			return e, err
		}
	}
	if r.Predictions != nil {
		if e.parts[part{kind: kindPredictions}], err = packPredictions(r.Predictions); err != nil {
			return e, err
		}
	}
	if e.parts[part{kind: kindRecord}], err = encode(record); err != nil {
		return e, err
	}
	e.summary, err = encode(summarise(&record))
	return e, err
}

// tensors sets the values of tensors aside as parts and returns their outlines.
func (e *encodedRun) tensors(kind byte, tensors []results.Tensor) ([]results.Tensor, error) {
	if len(tensors) > math.MaxUint16 {
		return nil, fmt.Errorf("%d tensors are more than a store numbers", len(tensors))
	}
	outlines := make([]results.Tensor, len(tensors))
	for i := range tensors {
		if err := tensors[i].Check(); err != nil {
			return nil, err
		}
		outlines[i] = tensors[i]
		outlines[i].Values, outlines[i].Raw = nil, nil
		e.parts[part{kind, uint16(i)}] = tensors[i].Bytes()
	}
	return outlines, nil
}

// putPart writes a part in pieces. An empty part is one empty piece, so that it
// can be told from a missing one.
func putPart(b *bolt.Bucket, key results.Hash, p part, data []byte) error {
	prefix := p.prefix(key)
	for piece := uint32(0); ; piece++ {
		n := min(len(data), pieceSize)
		k := binary.BigEndian.AppendUint32(bytes.Clone(prefix), piece)
		if err := b.Put(k, data[:n]); err != nil {
			return err
		}
		if data = data[n:]; len(data) == 0 {
			return nil
		}
	}
}

// getPart joins the pieces of a part. It errs when one is missing.
func getPart(b *bolt.Bucket, key results.Hash, p part) ([]byte, error) {
	prefix := p.prefix(key)
	out := []byte{}
	piece := uint32(0)
	c := b.Cursor()
	for k, v := c.Seek(prefix); bytes.HasPrefix(k, prefix); k, v = c.Next() {
		if binary.BigEndian.Uint32(k[len(prefix):]) != piece {
			break
		}
		out = append(out, v...)
		piece++
		if len(v) < pieceSize {
			break
		}
	}
	if piece == 0 {
		return nil, fmt.Errorf("part %c%d is missing", p.kind, p.index)
	}
	return out, nil
}

// deleteParts removes all parts of a run.
func deleteParts(b *bolt.Bucket, key results.Hash) error {
	var doomed [][]byte // deleting under a cursor makes it skip
	c := b.Cursor()
	for k, _ := c.Seek(key[:]); bytes.HasPrefix(k, key[:]); k, _ = c.Next() {
		doomed = append(doomed, bytes.Clone(k))
	}
	for _, k := range doomed {
		if err := b.Delete(k); err != nil {
			return err
		}
	}
	return nil
}

// readRun puts a run together again; its tensors only if wanted.
func readRun(b *bolt.Bucket, key results.Hash, tensors bool) (*results.Run, error) {
	raw, err := getPart(b, key, part{kind: kindRecord})
	if err != nil {
		return nil, err
	}
	r := new(results.Run)
	if err := decode(raw, r); err != nil {
		return nil, fmt.Errorf("record: %w", err)
	}
	if raw, err = getPart(b, key, part{kind: kindSteps}); err != nil {
		return nil, err
	}
	if r.Steps, err = results.Reals(raw); err != nil {
		return nil, fmt.Errorf("steps: %w", err)
	}
	if err := errors.Join(readFindings(b, key, r), readPredictions(b, key, r)); err != nil {
		return nil, err
	}
	if !tensors {
		r.Initial, r.Final = nil, nil
		return r, nil
	}
	return r, errors.Join(
		readTensors(b, key, kindInitial, r.Initial),
		readTensors(b, key, kindFinal, r.Final))
}

// readFindings reads what diagnostics found; runs of before there were any, and
// those not looked at, have none.
func readFindings(b *bolt.Bucket, key results.Hash, r *results.Run) error {
	if !r.Looked {
		return nil
	}
	raw, err := getPart(b, key, part{kind: kindLook})
	if err != nil {
		return err
	}
	r.Findings = new(results.Findings)
	if err := decode(raw, r.Findings); err != nil {
		return fmt.Errorf("findings: %w", err)
	}
	return nil
}

func readTensors(b *bolt.Bucket, key results.Hash, kind byte, tensors []results.Tensor) error {
	for i := range tensors {
		raw, err := getPart(b, key, part{kind, uint16(i)})
		if err != nil {
			return err
		}
		if err := tensors[i].SetBytes(raw); err != nil {
			return err
		}
	}
	return nil
}
