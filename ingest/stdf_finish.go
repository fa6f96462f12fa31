package ingest

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"sync"

	"kneepoint/config"
	"kneepoint/ingest/stdf"
)

// finish makes the chunk and layout of what was gathered.
func (s *stdfReading) finish(d *fileData, index int, sch *schema) {
	l := &layout{file: s.in.name, decimal: '.'}
	d.layout = l
	c := &chunk{n: s.n, file: index, odd: d.odd, text: make([]textColumn, textAttributes)}
	d.data = c
	s.nameTests(l)
	s.identity(d, c)
	ints := func(name, role string, slot int, v []int32) {
		if v = v[:s.n]; slices.ContainsFunc(v, func(x int32) bool { return x != Missing }) {
			c.ints[slot] = v
			l.addField(name, field{intField, slot, role})
		}
	}
	ints("X_COORD", "x", intX, s.x)
	ints("Y_COORD", "y", intY, s.y)
	ints("SITE_NUM", "site", intSite, s.site)
	s.numberTouchdowns()
	ints("touchdown", "touchdown", intTouchdown, s.touch)
	ints("HARD_BIN", "hard_bin", intHardBin, s.hard)
	ints("SOFT_BIN", "soft_bin", intSoftBin, s.soft)
	if pass := s.pass[:s.n]; slices.ContainsFunc(pass, func(p int8) bool { return p >= 0 }) {
		c.pass = pass
		l.addField("PART_FLG", field{passField, 0, "pass"})
	}
	if slices.ContainsFunc(s.ids.codes, func(k int32) bool { return k >= 0 }) {
		c.text[textPart] = textColumn{s.ids.codes, s.ids.text.dict}
		l.addField("PART_ID", field{textField, textPart, "part"})
	}
	s.runAttributes(d, c, sch)
	s.tests(l, c, sch)
	s.say(d, l)
	s.damages(d)
}

func (l *layout) addField(name string, f field) {
	l.names, l.fields = append(l.names, name), append(l.fields, f)
}

// identity gives lot and wafer of each row.
func (s *stdfReading) identity(d *fileData, c *chunk) {
	l, runs, wafers := d.layout, s.parts.Runs(), s.parts.Wafers()
	var lots globalText
	lotOf := make([]int32, len(runs))
	for i, r := range runs {
		if lotOf[i] = -1; padded(r.MIR.LotID) != "" {
			lotOf[i] = lots.code(padded(r.MIR.LotID))
		}
		if r.HasMIR && d.start == 0 {
			d.start = int64(r.MIR.StartTime)
		}
	}
	l.addField("LOT_ID", field{textField, textLot, "lot"})
	if len(lots.dict) == 1 && !slices.Contains(lotOf, -1) {
		d.lot = lots.dict[0]
	} else if len(lots.dict) > 0 {
		c.text[textLot] = textColumn{make([]int32, s.n), lots.dict}
		for i, r := range s.run[:s.n] {
			c.text[textLot].codes[i] = lotOf[r]
		}
	}
	var ids globalText
	waferOf, unnamed := make([]int32, len(wafers)), int64(0)
	fallback := waferOfName(s.in.name)
	for i, w := range wafers {
		id := w.ID
		if id == "" {
			id = fallback
			unnamed += w.Parts
		}
		waferOf[i] = ids.code(id)
	}
	if unnamed > 0 {
		d.note(Warning, "wafer-from-file-name", fmt.Sprintf("%s: %d %s of no wafer that a record names; taken for wafer %s, after the file's name", s.in.name, unnamed,
			plural(int(unnamed), "part is", "parts are"), quote(fallback)), "have the tester write the wafer id (WIR)", int(unnamed))
	}
	l.addField("WAFER_ID", field{textField, textWafer, "wafer"})
	codes := s.wafer[:s.n] // in place: the indexes are not needed again
	s.stretch = slices.Clone(codes)
	for i, w := range codes {
		codes[i] = waferOf[w]
	}
	c.text[textWafer] = textColumn{codes, ids.dict}
}

// numberTouchdowns goes on counting where a wafer is tested again in the same
// file.
func (s *stdfReading) numberTouchdowns() {
	wafers := s.parts.Wafers()
	type key struct {
		lot, id string
	}
	so := map[key]int32{}
	offset := make([]int32, len(wafers))
	for i, w := range wafers {
		k := key{padded(s.parts.Runs()[w.Run].MIR.LotID), w.ID}
		offset[i] = so[k]
		if i < len(s.touches) {
			so[k] += s.touches[i].n
		}
	}
	for i, w := range s.stretch {
		s.touch[i] += offset[w]
	}
	s.stretch = nil
}

// padded takes off what fixed-width writers pad texts with.
func padded(s string) string { return strings.Trim(s, " \x00\t\r\n") }

// mirAttributes are the fields of the MIR that become attributes of the lot,
// under names of the trade.
func mirAttributes(r *stdf.Run) [][2]string {
	m := r.MIR
	a := [][2]string{{roleProduct, m.PartType}, {"sublot", m.SublotID}, {"test program", m.Job}, {"program revision", m.JobRevision}, {"test temperature", temperature(m.Temperature)},
		{"test code", m.TestCode}, {"test flow", m.Flow}, {"tester type", m.TesterType}, {"tester", m.Node}, {"tester serial", m.TesterSerial}, {"operator", m.Operator},
		{"package", m.PackageType}, {"family", m.Family}, {"date code", m.DateCode}, {"facility", m.Facility}, {"floor", m.Floor}, {"process", m.Process},
		{"specification", m.SpecName}, {"specification version", m.SpecVersion}, {"setup", m.Setup}, {"design revision", m.Design}, {"remark", m.UserText}}
	if m.StartTime != 0 {
		a = append(a, [2]string{"start time", stdf.Time(m.StartTime).Format("2006-01-02 15:04:05")})
	}
	for _, sdr := range r.SDRs {
		a = append(a, [][2]string{{"probe card", sdr.CardID}, {"load board", sdr.LoadBoardID}, {"prober", sdr.HandlerID}}...)
	}
	var given [][2]string
	for _, kv := range a {
		kv[1] = padded(kv[1])
		if kv[1] != "" && !slices.ContainsFunc(given, func(g [2]string) bool { return g[0] == kv[0] }) {
			given = append(given, kv)
		}
	}
	return given
}

// temperature shows TST_TEMP with its unit where it is a number.
func temperature(s string) string {
	if v, ok := stdf.Celsius(s); ok {
		return fmt.Sprintf("%g °C", v)
	}
	return s
}

// runAttributes gives the lot what the runs say; what they say differently
// becomes a text column.
func (s *stdfReading) runAttributes(d *fileData, c *chunk, sch *schema) {
	runs := s.parts.Runs()
	said := make([]map[string]string, len(runs))
	var order []string
	for i, r := range runs {
		said[i] = map[string]string{}
		for _, kv := range mirAttributes(r) {
			if said[i][kv[0]] = kv[1]; !slices.Contains(order, kv[0]) {
				order = append(order, kv[0])
			}
		}
	}
	column := func(name string, of func(row int) string) {
		slot := textProduct
		if name != roleProduct {
			slot = sch.attribute(name)
		}
		for len(c.text) <= slot {
			c.text = append(c.text, textColumn{})
		}
		var g globalText
		codes := make([]int32, s.n)
		for i := range codes {
			if codes[i] = -1; of(i) != "" {
				codes[i] = g.code(of(i))
			}
		}
		c.text[slot] = textColumn{codes, g.dict}
		d.layout.addField(name, field{textField, slot, ""})
	}
	for _, name := range order {
		same := true
		for i := range runs {
			same = same && said[i][name] == said[0][name]
		}
		if same {
			d.attributes = append(d.attributes, [2]string{name, said[0][name]})
			continue
		}
		column(name, func(row int) string { return said[s.run[row]][name] })
	}
	if head := s.head[:s.n]; slices.ContainsFunc(head, func(h int32) bool { return h != head[0] }) {
		column("head", func(row int) string { return fmt.Sprint(head[row]) })
	}
	d.layout.attributes = d.attributes
	for _, r := range runs {
		d.about.add(factsOf(r))
	}
}

// factsOf takes geometry and bin names.
func factsOf(r *stdf.Run) *lotFacts {
	a := &lotFacts{}
	names := func(bins []stdf.Bin) map[int]string {
		m := map[int]string{}
		for _, b := range bins {
			if b.Name != "" {
				m[int(b.Number)] = b.Name
			}
		}
		return m
	}
	a.hardNames, a.softNames = names(r.HardBins), names(r.SoftBins)
	if w := r.WCR; w != nil {
		g := Geometry{CentreX: Missing, CentreY: Missing}
		if d, h, b, ok := w.Millimetres(); ok {
			g.DiameterMM, g.DieHeightMM, g.DieWidthMM = sane(d), sane(h), sane(b)
		}
		side := map[byte]string{'U': "up", 'D': "down", 'L': "left", 'R': "right"}
		g.Notch, g.XGrows, g.YGrows = side[w.Flat], side[w.PositiveX], side[w.PositiveY]
		if w.CenterX != stdf.NoCoordinate && w.CenterY != stdf.NoCoordinate {
			g.CentreX, g.CentreY = int32(w.CenterX), int32(w.CenterY)
		}
		a.geometry = g
	}
	return a
}

func sane(mm float64) float64 {
	if mm > 0 && mm < 2000 {
		return mm
	}
	return 0
}

// nameTests names the columns by test text, else by number. Tests of the same
// text, or that the columns of a multiple result share, are told apart by number
// and pin.
func (s *stdfReading) nameTests(l *layout) {
	base := func(c *stdfColumn) string {
		name := padded(c.test.Text)
		if name == "" {
			name = fmt.Sprintf("test %d", c.test.Number)
		}
		return name
	}
	tests := map[string][]*stdf.Test{}
	for i := range s.columns {
		key := strings.ToLower(base(&s.columns[i]))
		if !slices.Contains(tests[key], s.columns[i].test) {
			tests[key] = append(tests[key], s.columns[i].test)
		}
	}
	var shared []string
	taken := map[string]bool{}
	for i := range s.columns {
		c := &s.columns[i]
		c.name = base(c)
		if same := tests[strings.ToLower(c.name)]; len(same) > 1 {
			if same[0] == c.test && c.place == 0 {
				var numbers []string
				for _, t := range same {
					numbers = append(numbers, fmt.Sprint(t.Number))
				}
				shared = append(shared, fmt.Sprintf("%s (%s)", c.name, list(numbers, 6)))
			}
			c.name = fmt.Sprintf("%s #%d", c.name, c.test.Number)
		}
		if c.test.Kind == stdf.KindMPR {
			c.name += " " + s.parts.ColumnName(c.test, c.place)
		}
		for full := c.name; taken[strings.ToLower(c.name)]; {
			full += "'"
			c.name = full
		}
		taken[strings.ToLower(c.name)] = true
	}
	if len(shared) > 0 {
		l.note(Info, "same-test-text", fmt.Sprintf("%s: several tests have the same text; their numbers are put behind it, as in NAME #1030: %s", s.in.name,
			list(shared, 8)), "give them these names in the product file")
	}
}

// tests turns results into values and describes the tests.
func (s *stdfReading) tests(l *layout, c *chunk, sch *schema) {
	s.converting.Wait()
	var wg sync.WaitGroup
	slots := make(chan []float64)
	for range 4 {
		wg.Go(func() {
			cache := make([]decimalOf, 1<<12)
			for v := range slots {
				decimals(v, cache)
			}
		})
	}
	var texts []string
	for i := range s.columns {
		col := &s.columns[i]
		slots <- s.values[i][s.converted:s.n]
		lim := col.test.Limits[col.test.Default]
		t := testColumn{name: col.name, number: numberOf(col.test.Number), field: len(l.fields),
			lower: stdf.Decimal(lim.Lower), upper: stdf.Decimal(lim.Upper), unitText: lim.Units}
		l.addField(col.name, field{valueField, sch.test(col.name), ""})
		l.columns = append(l.columns, t)
		texts = append(texts, lim.Units)
	}
	close(slots)
	wg.Wait()
	units, errs := config.ParseUnits(texts)
	for i := range l.columns {
		t, lim := &l.columns[i], s.columns[i].test.Limits[s.columns[i].test.Default]
		if errs[i] != nil {
			l.note(Warning, "unit-not-understood", fmt.Sprintf("%s: test %s: %v", l.file, t.name, errs[i]), "correct the unit; the product file's is used if it gives one")
			continue
		}
		if lim.Units == "" {
			continue // not given, which in text is an empty cell
		}
		t.unit = units[i]
		if t.unit.Exp == 0 {
			t.si = true
			if u, err := config.ParseUnit(lim.DisplayUnit()); err == nil && u.Base == t.unit.Base {
				t.unit = u
			}
		}
	}
	c.values = make([][]float64, len(sch.tests))
	for i := range s.columns {
		c.values[l.fields[l.columns[i].field].slot] = s.values[i][:s.n]
		s.values[i] = nil
	}
}

func numberOf(n uint32) int {
	if n > math.MaxInt32 {
		return Missing
	}
	return int(n)
}

// decimalOf is a float32 and its decimal.
type decimalOf struct {
	f float32
	v float64
}

// decimals turns float32 results into the float64 of their shortest decimals.
// Readings come in the steps of the tester, so that most were met before.
func decimals(v []float64, cache []decimalOf) {
	for i, x := range v {
		if x != x {
			continue
		}
		f := float32(x)
		b := math.Float32bits(f)
		at := &cache[(b*0x9e3779b1)>>20]
		if at.f != f || f == 0 {
			at.f, at.v = f, stdf.Decimal(f)
		}
		v[i] = at.v
	}
}

// note adds a finding about the file.
func (d *fileData) note(s Severity, code, text, remedy string, dice int) {
	d.notes = append(d.notes, Finding{Code: code, Severity: s, Text: text, Remedy: remedy, Dice: dice})
}

// say adds the findings about tests.
func (s *stdfReading) say(d *fileData, l *layout) {
	d.notes = append(d.notes, l.notes...)
	if s.functional > 0 {
		n := 0
		for _, t := range s.parts.Tests() {
			if t.Kind == stdf.KindFTR {
				n++
			}
		}
		d.note(Info, "functional-tests", fmt.Sprintf("%s: %d functional %s with %d results, %d of them fails, %s no values and %s left out; the bins hold their verdict", s.in.name, n,
			plural(n, "test", "tests"), s.functional, s.functionalFails, plural(n, "has", "have"), plural(n, "is", "are")), "", 0)
	}
	if s.twice > 0 {
		d.note(Info, "result-again", fmt.Sprintf("%s: %d results are of a test that the part had before; the last usable one counts", s.in.name, s.twice), "", 0)
	}
	for _, c := range s.columns {
		if t := c.test; c.place == 0 && t.Overridden > 0 {
			lim := t.Limits[t.Default]
			d.note(Warning, "limits-mixed", fmt.Sprintf("%s: test %s: %d of %d results were judged by other limits or units than %s; these are used for all", s.in.name, c.name,
				t.Overridden, t.Records, floatLimits(lim)), "check whether test programs were mixed", 0)
		}
	}
	if skipped := s.parts.Reader().Skipped(); len(skipped) > 0 {
		var kinds []string
		for _, k := range skipped {
			kinds = append(kinds, fmt.Sprintf("%d of type %d, %d", k.Records, k.Type, k.Sub))
		}
		d.note(Info, "records-not-used", fmt.Sprintf("%s: records of types that hold nothing for this program were passed over: %s", s.in.name, list(kinds, 8)), "", 0)
	}
}

func floatLimits(l *stdf.Limits) string {
	one := func(f float32) string {
		if f != f {
			return "none"
		}
		return fmt.Sprintf("%g %s", stdf.Decimal(f), l.Units)
	}
	return one(l.Lower) + " to " + one(l.Upper)
}

// damageCodes are the findings that damages become, with their severity.
var damageCodes = map[stdf.DamageKind]struct {
	code     string
	severity Severity
	remedy   string
}{
	stdf.DamageCut:       {"cut-short", Severe, "fetch the file again"},
	stdf.DamageUnpacking: {"broken-off", Severe, "fetch the file again"},
	stdf.DamageSkipped:   {"resynchronised", Severe, "the file was damaged on its way; fetch it again"},
	stdf.DamageRecord:    {"odd-record", Warning, "the file was damaged on its way; fetch it again"},
	stdf.DamageStart:     {"odd-start", Warning, ""},
	stdf.DamagePadding:   {"padding", Info, ""},
	stdf.DamageCounts:    {"counts-disagree", Warning, "look whether parts are missing at the end of the file"},
	stdf.DamageNoMRR:     {"not-closed", Warning, "fetch the file again when the test is over"},
	stdf.DamageGap:       {"part-with-gap", Warning, "fetch the file again"},
	stdf.DamageNoPRR:     {"part-not-closed", Warning, ""},
	stdf.DamageOrphans:   {"results-of-nobody", Warning, ""},
}

// damages says what is wrong with the file, the first of each kind with its
// place.
func (s *stdfReading) damages(d *fileData) {
	const each = 3
	shown := map[stdf.DamageKind]int64{}
	for _, x := range s.parts.Damages() {
		if shown[x.Kind]++; shown[x.Kind] > each {
			continue
		}
		k, ok := damageCodes[x.Kind]
		if !ok {
			k.code, k.severity = string(x.Kind), Warning
		}
		d.note(k.severity, k.code, fmt.Sprintf("%s: byte %d: %s", s.in.name, x.Offset, x.Text), k.remedy, 0)
	}
	for _, k := range s.parts.DamageCounts() {
		if k.Count > each {
			code := damageCodes[k.Kind].code
			if code == "" {
				code = string(k.Kind)
			}
			d.note(Warning, code, fmt.Sprintf("%s: there are %d such places in all; the first %d are given", s.in.name, k.Count, each), "", 0)
		}
	}
}
