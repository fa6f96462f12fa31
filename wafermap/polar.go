package wafermap

import "math"

// The polar table: rings of equal width out to the rim of the tested disc, and
// angles, with sums over any rectangle of them.
const (
	polarRings  = 64
	polarAngles = 128
)

// rays is where a wafer's dice lie in the table.
type rays struct {
	far, turn []float64 // by die: distance from the centre and angle, -pi to pi
	at        []uint16  // cell by die: ring*polarAngles + angle
	tested    []int32   // dice by cell
}

// polar is a fail map in it.
type polar struct {
	*rays
	expecting []float64
	sums      []tally // [ring][angle], below both; angles run twice round
	rings     []tally // by ring, from the centre: dice in rings below
}

const polarStride = 2*polarAngles + 1

func (p *places) newRays() *rays {
	n := len(p.rows)
	q := &rays{far: make([]float64, n), turn: make([]float64, n), at: make([]uint16, n), tested: make([]int32, polarRings*polarAngles)}
	for i := range q.at {
		q.far[i], q.turn[i] = math.Sqrt(p.u[i]*p.u[i]+p.v[i]*p.v[i]), math.Atan2(p.v[i], p.u[i])
		r := min(int(q.far[i]*polarRings), polarRings-1)
		turn := q.turn[i] / (2 * math.Pi)
		if turn < 0 {
			turn++
		}
		c := r*polarAngles + min(int(turn*polarAngles), polarAngles-1)
		q.at[i] = uint16(c)
		q.tested[c]++
	}
	return q
}

func (f *field) layPolar() {
	q := &f.polar
	q.rays = f.raysFor()
	failing := make([]int32, polarRings*polarAngles)
	for _, i := range f.failing {
		failing[q.at[i]]++
	}
	q.expecting = make([]float64, polarRings*polarAngles)
	q.sums = make([]tally, (polarRings+1)*polarStride)
	q.rings = make([]tally, polarRings+1)
	for r := range polarRings {
		var run tally
		for k := range 2 * polarAngles {
			c := r*polarAngles + k%polarAngles
			run.o += float64(failing[c])
			run.n += float64(q.tested[c])
			q.sums[(r+1)*polarStride+k+1] = q.sums[r*polarStride+k+1].plus(run)
		}
	}
}

// sum refreshes the expected fails.
func (q *polar) sum(f *field) {
	clear(q.expecting)
	for i, p := range f.p {
		q.expecting[q.at[i]] += p
	}
	for r := range polarRings {
		run, lower, upper := 0.0, q.sums[r*polarStride+1:], q.sums[(r+1)*polarStride+1:]
		row := q.expecting[r*polarAngles : (r+1)*polarAngles]
		for turn := range 2 {
			below, above := lower[turn*polarAngles:][:polarAngles], upper[turn*polarAngles:][:polarAngles]
			for k, e := range row {
				run += e
				above[k].e = below[k].e + run
			}
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
