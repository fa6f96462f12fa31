package junction

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
)

// Keeper keeps the tables of models from one run to the next. Load returns nil where there is
// nothing under a key; what it returns need not be what was kept.
type Keeper interface {
	Load(key string) []byte
	Keep(key string, tables []byte)
}

// tablesVersion is raised when a model's tables come to be laid out or filled otherwise.
// Tables filled by other laws are found out by nodes that are computed again.
const tablesVersion = 1

// NewKeptModel is [NewModel] with the tables that take longest to fill (most of a second)
// taken from a keeper, or given to it. Tables that are damaged, or whose nodes are not those
// that this program computes, are filled and kept again: the model is the same to the last bit.
func NewKeptModel(keep Keeper, device Device, tests ...Test) (*Model, error) {
	m, err := anchored(device, natural, tests)
	if err != nil {
		return nil, err
	}
	key := m.tablesKey()
	if t := decodeTables(keep.Load(key), key); t != nil && m.fill(t) == nil && t.done() && m.sound() {
		return m, nil
	}
	t := &tape{}
	if err := m.fill(t); err != nil {
		return nil, err
	}
	keep.Keep(key, t.encode(key))
	return m, nil
}

// tablesKey names all that the tables depend on.
func (m *Model) tablesKey() string {
	sum := sha256.Sum256(fmt.Appendf(nil, "%d %+v %+v %+v", tablesVersion, m.Device, m.nat, m.Tests))
	return hex.EncodeToString(sum[:16])
}

// tape is a row of numbers that tables are written to, or read from.
type tape struct {
	reading bool
	data    []float64
	at      int
	bad     bool // it was too short
}

// number writes or reads one number, and row several.
func (t *tape) number(v *float64) {
	if !t.reading {
		t.data = append(t.data, *v)
		return
	}
	if t.at >= len(t.data) {
		t.bad = true
		return
	}
	*v = t.data[t.at]
	t.at++
}

func (t *tape) row(v []float64) {
	for i := range v {
		t.number(&v[i])
	}
}

// done reports whether all was read, and no more.
func (t *tape) done() bool { return !t.bad && t.at == len(t.data) }

// encode is the numbers as bytes, with a checksum.
func (t *tape) encode(key string) []byte {
	out := make([]byte, 0, 8*len(t.data)+sha256.Size)
	for _, v := range t.data {
		out = binary.LittleEndian.AppendUint64(out, math.Float64bits(v))
	}
	return append(out, checksum(key, out)...)
}

func checksum(key string, data []byte) []byte {
	h := sha256.New()
	h.Write([]byte(key))
	h.Write(data)
	return h.Sum(nil)
}

// decodeTables returns nil for bytes that are no tables of the key.
func decodeTables(kept []byte, key string) *tape {
	n := len(kept) - sha256.Size
	if n <= 0 || n%8 != 0 || !bytes.Equal(checksum(key, kept[:n]), kept[n:]) {
		return nil
	}
	t := &tape{reading: true, data: make([]float64, n/8)}
	for i := range t.data {
		t.data[i] = math.Float64frombits(binary.LittleEndian.Uint64(kept[8*i:]))
	}
	return t
}

// sound computes some nodes of the tables again.
func (m *Model) sound() bool {
	same := func(kept, now float64) bool { return math.IsNaN(now) || kept == now } // NaN was mended
	vals, ok := make([]float64, len(m.tables)), true
	for _, node := range [3][2]int{{4 * weakEveryU, weakEveryV}, {7, 3}, {25, 12}} {
		i := node[0]*m.grid.v.n + node[1]
		m.planeAt(vals, m.processAt(m.grid.u.at(node[0]), m.grid.v.at(node[1]), &Process{}))
		for k := range vals {
			ok = ok && same(m.tables[k].f[i], vals[k])
		}
	}
	i := 4*weakEveryU*m.grid.v.n + weakEveryV
	for w := range weak {
		for k, v := range m.weakAt(w, i) {
			ok = ok && same(m.tables[k].weak[w][i], v)
		}
	}
	if t := m.rims; t != nil {
		ok = ok && same(t.f[len(t.f)/3], m.rimNode(t, len(t.f)/3))
	}
	return ok
}
