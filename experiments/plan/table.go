package plan

import (
	"math"
	"strconv"
	"strings"
)

// CostTable is what a machine's and an energy table have in common: what they
// say about themselves, and the places of their fields.
type CostTable struct {
	Name, Date, Source string
	Formats            []CostFormat // names of rows that are not common ones
	root               *node
}

// CostFormat is a format as a cost table describes it: its family is "float",
// "integer" or "logarithmic"; Block values share ScaleBits.
type CostFormat struct {
	Name, Family                 string
	Bits, Exponent, Fraction     int
	Block, ScaleBits, TensorBits int
}

// Machine is a machine's table: what it can do at its peak.
type Machine struct {
	CostTable
	Bandwidth   float64 // bytes a second
	Cache       uint64  // bytes
	Elementwise float64 // operations a second
	RandomBits  float64 // a second
	Absent      string
	Rates       []Rate
}

// Rate is the peak rate of one pair of formats.
type Rate struct {
	Operands, Sum string
	MultiplyAdds  float64 // a second
	Source        string
}

// Energy is a table of what operations and bits cost, in picojoules.
type Energy struct {
	CostTable
	Process     string
	Memory      float64 // of 64 bits from main memory
	RandomBit   float64
	UsesPerRead float64
	Notes       []string
	Operations  []OperationEnergy
	Caches      []CacheEnergy
}

// OperationEnergy is the energy of one operation of a format; 0: not known.
type OperationEnergy struct {
	Format        string
	Multiply, Add float64
	Source        string
}

// CacheEnergy is the energy of reading 64 bits from a cache of a size in bytes.
type CacheEnergy struct {
	Bytes     uint64
	Per64Bits float64
	Source    string
}

// The keys of the tables.
var (
	identityKeys   = []string{"name", "date", "source", "format"}
	machineKeys    = append([]string{"bandwidth", "cache", "elementwise", "random_bits", "absent", "rate"}, identityKeys...)
	rateKeys       = []string{"operands", "sum", "multiply_adds", "source"}
	energyKeys     = append([]string{"process", "memory_per_64_bits", "random_bit", "uses_per_read", "notes", "operation", "cache"}, identityKeys...)
	operationKeys  = []string{"format", "multiply", "add", "source"}
	cacheKeys      = []string{"bytes", "per_64_bits", "source"}
	costFormatKeys = []string{"name", "family", "bits", "exponent", "fraction", "block", "scale_bits", "tensor_bits"}
)

// LoadMachine reads the [machine] table of a file. It checks keys and types; what
// the figures must be like is the cost model's to say, which tells its errors
// through Fault. The error is a *PlanError or Errors.
func LoadMachine(name string) (*Machine, error) {
	r := &reader{}
	root, err := r.loadTable(name, "machine", machineKeys)
	if err != nil {
		return nil, err
	}
	m := &Machine{
		CostTable:   r.readIdentity(root),
		Bandwidth:   r.number(root, "bandwidth", 0),
		Cache:       r.bytes(root, "cache"),
		Elementwise: r.number(root, "elementwise", 0),
		RandomBits:  r.number(root, "random_bits", 0),
		Absent:      r.text(root, "absent", ""),
	}
	for _, n := range r.tables(root, "rate") {
		r.known(n, rateKeys...)
		m.Rates = append(m.Rates, Rate{
			r.text(n, "operands", ""), r.text(n, "sum", ""), r.number(n, "multiply_adds", 0), r.text(n, "source", ""),
		})
	}
	return m, r.result()
}

// LoadEnergy reads the [energy] table of a file, as LoadMachine does.
func LoadEnergy(name string) (*Energy, error) {
	r := &reader{}
	root, err := r.loadTable(name, "energy", energyKeys)
	if err != nil {
		return nil, err
	}
	e := &Energy{
		CostTable:   r.readIdentity(root),
		Process:     r.text(root, "process", ""),
		Memory:      r.number(root, "memory_per_64_bits", 0),
		RandomBit:   r.number(root, "random_bit", 0),
		UsesPerRead: r.number(root, "uses_per_read", 1),
	}
	e.Notes, _ = r.texts(root, "notes")
	for _, n := range r.tables(root, "operation") {
		r.known(n, operationKeys...)
		e.Operations = append(e.Operations, OperationEnergy{
			r.text(n, "format", ""), r.number(n, "multiply", 0), r.number(n, "add", 0), r.text(n, "source", ""),
		})
	}
	for _, n := range r.tables(root, "cache") {
		r.known(n, cacheKeys...)
		e.Caches = append(e.Caches, CacheEnergy{r.bytes(n, "bytes"), r.number(n, "per_64_bits", 0), r.text(n, "source", "")})
	}
	return e, r.result()
}

// loadTable reads a file that holds one table.
func (r *reader) loadTable(name, table string, keys []string) (*node, error) {
	l := loader{source: disk{&[]string{}}}
	root, err := l.load(name, nil, nil)
	if err != nil {
		return nil, err
	}
	r.known(root, table)
	n := r.required(root, table, "["+table+"] with name, date and source")
	if n != nil {
		r.known(n, keys...)
	}
	if err := r.result(); err != nil && n == nil {
		return nil, err
	}
	return n, nil
}

// result are the errors recorded so far in order, or nil.
func (r *reader) result() error {
	if len(r.errs) == 0 {
		return nil
	}
	return r.errs.inOrder()
}

// readIdentity reads what a table says about itself, and its own formats.
func (r *reader) readIdentity(root *node) CostTable {
	t := CostTable{
		Name: r.text(root, "name", ""), Date: r.text(root, "date", ""), Source: r.text(root, "source", ""), root: root,
	}
	for _, n := range r.tables(root, "format") {
		r.known(n, costFormatKeys...)
		count := func(key string) int { return int(r.whole(n, key, 0, 0, math.MaxInt32)) }
		t.Formats = append(t.Formats, CostFormat{
			Name: r.text(n, "name", ""), Family: r.text(n, "family", "float"),
			Bits: count("bits"), Exponent: count("exponent"), Fraction: count("fraction"),
			Block: count("block"), ScaleBits: count("scale_bits"), TensorBits: count("tensor_bits"),
		})
	}
	return t
}

// bytes reads a size.
func (r *reader) bytes(n *node, key string) uint64 {
	return uint64(r.whole(n, key, 0, 0, math.MaxInt64))
}

// Fault is the error about a field of the table, "rate[2].multiply_adds", at the
// line where the field is written or would have to be.
func (t *CostTable) Fault(field, reason, remedy string) *PlanError {
	n := t.root
	for _, word := range strings.Split(field, ".") {
		name, index, _ := strings.Cut(word, "[")
		sub := n.table[name]
		if sub == nil {
			break
		}
		n = sub
		if i, err := strconv.Atoi(strings.TrimSuffix(index, "]")); err == nil && i >= 1 && i <= len(n.list) {
			n = n.list[i-1]
		}
	}
	e := n.errorf(remedy, "%s", reason)
	e.Key = joinField(t.root.key, field)
	return e
}

// joinField is a field below a table's key.
func joinField(key, field string) string {
	if field == "" {
		return key
	}
	return key + "." + field
}
