package junction

import (
	"reflect"
	"testing"
)

// keptTables is a keeper in memory.
type keptTables map[string][]byte

func (k keptTables) Load(key string) []byte         { return k[key] }
func (k keptTables) Keep(key string, tables []byte) { k[key] = tables }

// TestKeptModel wants a model from kept tables to be the model itself, and damaged or
// foreign tables to be filled anew.
func TestKeptModel(t *testing.T) {
	dev, tests := demoDevice(), demoTests()
	want, err := NewModel(dev, tests...)
	if err != nil {
		t.Fatal(err)
	}
	kept := keptTables{}
	var key string
	check := func(how string) {
		t.Helper()
		m, err := NewKeptModel(kept, dev, tests...)
		if err != nil {
			t.Fatal(err)
		}
		key = m.tablesKey()
		if len(kept) != 1 {
			t.Errorf("%s: %d tables kept", how, len(kept))
		}
		for _, part := range [][2]any{{m.tables, want.tables}, {m.rims, want.rims}, {m.linear, want.linear}, {m.levels, want.levels}, {m.recipes, want.recipes}} {
			if !reflect.DeepEqual(part[0], part[1]) {
				t.Errorf("%s: the model differs", how)
			}
		}
	}
	check("nothing kept")
	good := append([]byte(nil), kept[key]...)
	check("kept")
	mark := decodeTables(kept[key], key)
	mark.data[len(mark.data)-1]++ // of the last slope, which no node tells
	kept[key] = mark.encode(key)
	if m, err := NewKeptModel(kept, dev, tests...); err != nil || reflect.DeepEqual(m.linear, want.linear) {
		t.Error("what was kept was not read", err)
	}
	for how, b := range map[string][]byte{"nothing": nil, "cut": good[:len(good)/2], "a bit off": append([]byte{good[0] ^ 4}, good[1:]...),
		"of another": decodeTables(good, key).encode("another")} {
		if decodeTables(b, key) != nil {
			t.Errorf("%s: taken for tables", how)
		}
	}
	short, other := decodeTables(good, key), decodeTables(good, key)
	short.data = short.data[:len(short.data)-1]
	for i := range other.data {
		other.data[i] *= 1.0001
	}
	for how, b := range map[string][]byte{"too short": short.encode(key), "by other laws": other.encode(key)} {
		kept[key] = b
		check(how)
		if !reflect.DeepEqual(kept[key], good) {
			t.Errorf("%s: the tables were not kept again", how)
		}
	}
}

func BenchmarkNewModel(b *testing.B) {
	b.Run("filled", func(b *testing.B) {
		for b.Loop() {
			NewModel(demoDevice(), demoTests()...)
		}
	})
	b.Run("kept", func(b *testing.B) {
		kept := keptTables{}
		NewKeptModel(kept, demoDevice(), demoTests()...)
		for b.Loop() {
			NewKeptModel(kept, demoDevice(), demoTests()...)
		}
	})
}
