package plan

import (
	"archive/zip"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"ulpine/datasets/npy"
	"ulpine/trainer"
)

// Start is the parameters that every arm, the baseline and the controls included,
// starts from in every replicate in place of drawn ones. An arm rounds them as its
// masters, so arms stay paired.
type Start struct {
	From   string // in words, for print
	Params []trainer.Param
	Hash   [32]byte // SHA-256 of names, shapes and values
}

// StoredRuns yields the final parameters of a run, called arm/replicate, of the store
// in a file.
type StoredRuns interface {
	FinalParams(file, run string) ([]trainer.Param, error)
}

// readStart reads [start], or returns nil.
func (r *reader) readStart(root *node, network *trainer.Network) *Start {
	n := r.table(root, "start", `[start] with file = "weights.npz"`)
	if n == nil {
		return nil
	}
	r.known(n, "file", "part", "store", "run")
	if root.table["pretrain"] != nil {
		r.fail(n.errorf("keep one of the two", "[start] and [pretrain] both say where arms start"))
		return nil
	}
	if len(network.Layers) == 0 {
		return nil // told already
	}
	switch file, stored := n.table["file"], n.table["store"]; {
	case (file == nil) == (stored == nil):
		r.fail(n.errorf(`write file = "weights.npz", or store = "ulpine.store" and run = "baseline/100"`, "there must be either a file or a store"))
		return nil
	case stored != nil:
		return r.startOfRun(n, network)
	}
	return r.startOfFile(n, network)
}

// besidePlan is the path under a key, relative to the file that it is written in.
func (r *reader) besidePlan(n *node, key string) string {
	path := filepath.FromSlash(r.text(n, key, ""))
	if path == "" || filepath.IsAbs(path) {
		return path
	}
	return filepath.Join(filepath.Dir(filepath.FromSlash(n.table[key].file)), path)
}

// remedySame is what helps where parameters do not fit.
const remedySame = "start from a run of the same network, saved by ulpine show RUN --weights FILE"

// startOfFile reads parameters from an NPZ archive.
func (r *reader) startOfFile(n *node, network *trainer.Network) *Start {
	at := n.table["file"]
	before := len(r.errs)
	path, part := r.besidePlan(n, "file"), r.word(n, "part", "final", "final", "initial")
	if other := n.table["run"]; other != nil {
		r.fail(other.errorf("leave it out, or name a store", "a run is one of a store"))
	}
	if len(r.errs) > before {
		return nil
	}
	z, err := zip.OpenReader(path)
	if err != nil {
		e := at.errorf("name an NPZ file, as ulpine show RUN --weights FILE writes it", "cannot read %s as an archive of arrays: %v", path, cause(err))
		e.Err = err
		r.fail(e)
		return nil
	}
	defer z.Close()
	params, err := readParams(&z.Reader, part, network)
	if err != nil {
		e := at.errorf(remedySame, "%s: %v", path, err)
		e.Err = err
		r.fail(e)
		return nil
	}
	return newStart(filepath.Base(path), params)
}

// cause is an error without the path that stands before it already.
func cause(err error) error {
	if inner, ok := err.(interface{ Unwrap() error }); ok && inner.Unwrap() != nil {
		return inner.Unwrap()
	}
	return err
}

// startOfRun reads parameters from a store.
func (r *reader) startOfRun(n *node, network *trainer.Network) *Start {
	at := n.table["run"]
	if at == nil {
		r.fail(n.errorf(`write run = "baseline/100"`, "run is missing: which run of the store?"))
		return nil
	}
	if other := n.table["part"]; other != nil {
		r.fail(other.errorf("leave it out", "it belongs to a file; of a run the final parameters are taken"))
	}
	before := len(r.errs)
	path, run := r.besidePlan(n, "store"), r.text(n, "run", "")
	switch {
	case len(r.errs) > before:
		return nil
	case r.stored == nil:
		r.fail(n.errorf("save the run by ulpine show RUN --weights FILE and name that file", "no store can be read here"))
		return nil
	}
	params, err := r.stored.FinalParams(path, run)
	if err == nil {
		err = fit(params, network)
	}
	if err != nil {
		e := at.errorf("start from a stored run of the same network", "%v", err)
		if _, gone := os.Stat(path); errors.Is(err, fs.ErrNotExist) || errors.Is(gone, fs.ErrNotExist) {
			e = n.table["store"].errorf("name a store that a plan was run into, by a path relative to the plan", "there is no store %s", path)
		}
		e.Err = err
		r.fail(e)
		return nil
	}
	return newStart(fmt.Sprintf("run %s of %s", run, filepath.Base(path)), params)
}

// readParams reads the parameters of a network from an archive: arrays called
// "final/layer0.weight" or, where no name begins like that, "layer0.weight". Only
// what is wanted is read, and of it no more than the network holds.
func readParams(z *zip.Reader, part string, network *trainer.Network) ([]trainer.Param, error) {
	members := map[string]*zip.File{}
	prefix := ""
	for _, f := range z.File {
		name, isArray := strings.CutSuffix(f.Name, ".npy")
		if !isArray {
			return nil, fmt.Errorf("member %q is no array", f.Name)
		}
		members[name] = f
		if strings.HasPrefix(name, "final/") || strings.HasPrefix(name, "initial/") {
			prefix = part + "/"
		}
	}
	wanted := network.ParamShapes()
	var params []trainer.Param
	for _, p := range wanted {
		f := members[prefix+p.Name]
		if f == nil {
			return nil, fmt.Errorf("it has no array %q, which the network has", prefix+p.Name)
		}
		a, err := readParam(f, p.Shape)
		if err != nil {
			return nil, fmt.Errorf("array %q: %w", prefix+p.Name, err)
		}
		params = append(params, trainer.Param{Name: p.Name, Shape: a.Shape, Wide: a.Wide, Values: a.Values})
	}
	for name := range members {
		known := slices.ContainsFunc(wanted, func(p trainer.Param) bool { return prefix+p.Name == name })
		if !known && strings.HasPrefix(name, prefix) {
			return nil, fmt.Errorf("it has an array %q, which the network has not", name)
		}
	}
	return params, fit(params, network)
}

// readParam reads one array of a shape.
func readParam(f *zip.File, shape []int) (*npy.Array, error) {
	in, err := f.Open()
	if err != nil {
		return nil, err
	}
	defer in.Close()
	n, _ := npy.Len(shape)
	return npy.ReadNumbers(in, max(n, 1))
}

// fit holds parameters to a network.
func fit(params []trainer.Param, network *trainer.Network) error {
	wanted := network.ParamShapes()
	if len(params) != len(wanted) {
		return fmt.Errorf("it has %d parameter tensors, the network has %d", len(params), len(wanted))
	}
	for i, p := range params {
		if p.Name != wanted[i].Name || !slices.Equal(p.Shape, wanted[i].Shape) {
			return fmt.Errorf("%s has the shape %s, the network's %s has %s", p.Name, shapeText(p.Shape), wanted[i].Name, shapeText(wanted[i].Shape))
		}
		for k, x := range p.Values {
			if math.IsNaN(x) || math.IsInf(x, 0) {
				return fmt.Errorf("%s: value %d is %g", p.Name, k, x)
			}
		}
	}
	return nil
}

// newStart hashes what arms start from.
func newStart(from string, params []trainer.Param) *Start {
	h := sha256.New()
	word := func(n uint64) { h.Write(binary.LittleEndian.AppendUint64(nil, n)) }
	for _, p := range params {
		word(uint64(len(p.Name)))
		h.Write([]byte(p.Name))
		word(uint64(len(p.Shape)))
		for _, d := range p.Shape {
			word(uint64(d))
		}
		for _, x := range p.Values {
			word(math.Float64bits(x))
		}
	}
	s := &Start{From: from, Params: params}
	h.Sum(s.Hash[:0])
	return s
}

// canonical names the values, wherever they lie.
func (s *Start) canonical() string { return "start: " + hex.EncodeToString(s.Hash[:]) + "\n" }

// Text is where arms start, in words.
func (s *Start) Text() string {
	return fmt.Sprintf("%s (values %s)", s.From, hex.EncodeToString(s.Hash[:6]))
}
