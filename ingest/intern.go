package ingest

// interner numbers the texts of a column within a chunk.
type interner struct {
	codes map[string]int32
	dict  []string
	last  []byte // raw bytes of the last cell seen
	code  int32
	fresh []fresh // what the row at work added
}

// fresh is a text, or a way to write one, that was new.
type fresh struct {
	raw, text string // text "" when it was known
}

// intern gives the code of a cell.
func (t *interner) intern(raw []byte) int32 {
	if t.last != nil && string(raw) == string(t.last) {
		return t.code
	}
	t.last = raw
	code, ok := t.codes[string(raw)]
	if !ok {
		code = t.add(string(raw), cellText(raw))
	}
	t.code = code
	return code
}

// add takes a way to write a text that was not seen before; the same text may
// be written in several ways, with blanks around it.
func (t *interner) add(raw, text string) int32 {
	f := fresh{raw: raw}
	code := int32(-1)
	if text != "" {
		known := false
		if code, known = t.codes[text]; !known {
			code = int32(len(t.dict))
			t.dict = append(t.dict, text)
			t.codes[text] = code
			f.text = text
		}
	}
	t.codes[raw] = code
	t.fresh = append(t.fresh, f)
	return code
}

// forget takes back what a row added that is left to the full reader, which may
// not use it.
func (t *interner) forget() {
	for i := len(t.fresh) - 1; i >= 0; i-- {
		f := t.fresh[i]
		delete(t.codes, f.raw)
		if f.text != "" {
			delete(t.codes, f.text)
			t.dict = t.dict[:len(t.dict)-1]
		}
	}
	t.fresh, t.last = t.fresh[:0], nil
}
