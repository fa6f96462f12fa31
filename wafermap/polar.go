package wafermap

import "math"

// The polar table: rings of equal width out to the rim of the tested disc, and
// angles, with sums over any rectangle of them.
const (
	polarRings  = 64
	polarAngles = 128
)

type polar struct {
	far, turn       []float64 // by die: distance from the centre and angle, -pi to pi
	at              []uint16  // cell by die: ring*polarAngles + angle
	failing, tested []int32
	expecting       []float64
	sums            []tally // [ring][angle], below both; angles run twice round
	rings           []tally // by ring, from the centre: dice in rings below
}

const polarStride = 2*polarAngles + 1

func (f *field) layPolar() {
	q := &f.polar
	q.at = make([]uint16, len(f.rows))
	q.failing, q.tested, q.expecting = make([]int32, polarRings*polarAngles), make([]int32, polarRings*polarAngles), make([]float64, polarRings*polarAngles)
	q.far, q.turn = make([]float64, len(f.rows)), make([]float64, len(f.rows))
	for i := range f.rows {
		q.far[i], q.turn[i] = math.Sqrt(f.u[i]*f.u[i]+f.v[i]*f.v[i]), math.Atan2(f.v[i], f.u[i])
		r := min(int(q.far[i]*polarRings), polarRings-1)
		turn := q.turn[i] / (2 * math.Pi)
		if turn < 0 {
			turn++
		}
		c := r*polarAngles + min(int(turn*polarAngles), polarAngles-1)
		q.at[i] = uint16(c)
		q.tested[c]++
		if f.fail[i] {
			q.failing[c]++
		}
	}
	q.sums = make([]tally, (polarRings+1)*polarStride)
	q.rings = make([]tally, polarRings+1)
}

func (q *polar) sum(f *field) {
	clear(q.expecting)
	for i, p := range f.p {
		q.expecting[q.at[i]] += p
	}
	for r := range polarRings {
		var run tally
		for k := range 2 * polarAngles {
			c := r*polarAngles + k%polarAngles
			run = run.plus(tally{float64(q.failing[c]), float64(q.tested[c]), q.expecting[c]})
			q.sums[(r+1)*polarStride+k+1] = q.sums[r*polarStride+k+1].plus(run)
		}
		q.rings[r+1] = q.sums[(r+1)*polarStride+polarAngles]
	}
}

// rectangle tallies rings r0 <= r < r1 over width angles from start on.
func (q *polar) rectangle(r0, r1, start, width int) tally {
	a, b := start, start+width
	hi, lo := q.sums[r1*polarStride:], q.sums[r0*polarStride:]
	return hi[b].minus(hi[a]).minus(lo[b].minus(lo[a]))
}

// ring tallies rings r0 <= r < r1.
func (q *polar) ring(r0, r1 int) tally { return q.rings[r1].minus(q.rings[r0]) }
