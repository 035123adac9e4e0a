package store

import (
	"bytes"
	"compress/flate"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

// packed is the record of predictions. Data is compressed (RFC 1951) and holds,
// little-endian, of a classification the class plus one of every example in Width
// bytes, then for every example the class called plus one (0: none) less that, so
// that right answers are zeros; of a regression the binary32 values, then the
// targets.
type packed struct {
	Examples uint64 `cbor:"1,keyasint"`
	Outputs  uint64 `cbor:"2,keyasint"` // 0: a classification
	Width    uint64 `cbor:"3,keyasint"` // bytes a class: 1, 2 or 4
	Data     []byte `cbor:"4,keyasint"`
}

// size is the number of bytes before compression.
func (p *packed) size() uint64 {
	if p.Outputs > 0 {
		return 8 * p.Examples * p.Outputs
	}
	return 2 * p.Examples * p.Width
}

// check refuses sizes that no run has, so that a damaged record cannot ask for all
// memory.
func (p *packed) check() error {
	wide := p.Width == 1 || p.Width == 2 || p.Width == 4
	if p.Examples > math.MaxInt32 || p.Outputs > math.MaxUint16 || p.Outputs == 0 && !wide || p.size() > math.MaxInt32 {
		return fmt.Errorf("predictions of %d examples, %d outputs, %d bytes a class", p.Examples, p.Outputs, p.Width)
	}
	return nil
}

// packPredictions is the record as bytes.
func packPredictions(p *results.Predictions) ([]byte, error) {
	if !p.Sound() {
		return nil, errors.New("predictions of other lengths than what they predict")
	}
	record := packed{Examples: uint64(p.Examples()), Outputs: uint64(p.Outputs)}
	var plain []byte
	if p.Outputs > 0 {
		plain = reals32(reals32(nil, p.Values), p.Targets)
	} else {
		record.Width = classWidth(p)
		plain = classes(&record, p)
	}
	if err := record.check(); err != nil {
		return nil, err
	}
	var b bytes.Buffer
	w, err := flate.NewWriter(&b, flate.BestCompression)
	if err != nil {
		return nil, err
	}
	if _, err := w.Write(plain); err != nil {
		return nil, err
	}
	if err := w.Close(); err != nil {
		return nil, err
	}
	record.Data = b.Bytes()
	return encode(record)
}

func reals32(out []byte, xs []float32) []byte {
	for _, x := range xs {
		out = binary.LittleEndian.AppendUint32(out, math.Float32bits(x))
	}
	return out
}

// classWidth is the least number of bytes that holds every class plus one.
func classWidth(p *results.Predictions) uint64 {
	var most int32
	for i, c := range p.Called {
		most = max(most, c, p.Truth[i])
	}
	switch {
	case most < math.MaxUint8:
		return 1
	case most < math.MaxUint16:
		return 2
	}
	return 4
}

func classes(record *packed, p *results.Predictions) []byte {
	plain := make([]byte, 0, record.size())
	add := func(v uint32) {
		plain = append(plain, binary.LittleEndian.AppendUint32(nil, v)[:record.Width]...)
	}
	for _, t := range p.Truth {
		add(uint32(t + 1))
	}
	for i, c := range p.Called {
		add(uint32(c - p.Truth[i])) // modulo the width
	}
	return plain
}

// unpackPredictions undoes packPredictions.
func unpackPredictions(raw []byte) (*results.Predictions, error) {
	var record packed
	if err := decode(raw, &record); err != nil {
		return nil, err
	}
	if err := record.check(); err != nil {
		return nil, err
	}
	plain := make([]byte, record.size())
	r := flate.NewReader(bytes.NewReader(record.Data))
	if _, err := io.ReadFull(r, plain); err != nil {
		return nil, err
	}
	if n, err := r.Read(make([]byte, 1)); n != 0 || err != io.EOF {
		return nil, errors.New("more bytes than examples")
	}
	p := &results.Predictions{Outputs: int(record.Outputs)}
	n := int(record.Examples)
	if p.Outputs > 0 {
		p.Values, p.Targets = make([]float32, n*p.Outputs), make([]float32, n*p.Outputs)
		for i := range p.Values {
			p.Values[i] = math.Float32frombits(binary.LittleEndian.Uint32(plain[4*i:]))
			p.Targets[i] = math.Float32frombits(binary.LittleEndian.Uint32(plain[4*(i+len(p.Values)):]))
		}
		return p, nil
	}
	width := int(record.Width)
	at := func(i int) (v uint32) {
		for k := width - 1; k >= 0; k-- {
			v = v<<8 | uint32(plain[i*width+k])
		}
		return v
	}
	mask := uint32(1<<(8*width) - 1)
	p.Truth, p.Called = make([]int32, n), make([]int32, n)
	for i := range p.Truth {
		truth := at(i)
		p.Truth[i], p.Called[i] = int32(truth)-1, int32((truth+at(n+i))&mask)-1
	}
	return p, nil
}

// readPredictions reads what a run said of every test example; runs of before that
// was kept, and those told not to keep it, have none.
func readPredictions(b *bolt.Bucket, key results.Hash, r *results.Run) error {
	if !r.Kept {
		return nil
	}
	raw, err := getPart(b, key, part{kind: kindPredictions})
	if err != nil {
		return err
	}
	if r.Predictions, err = unpackPredictions(raw); err != nil {
		return fmt.Errorf("predictions: %w", err)
	}
	return nil
}
