package variance

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// model is what of a design can be estimated, on readings shifted to mean zero and
// scaled to variance one. Variance number k < levels belongs to the k-th level
// that is left, number levels to the dice.
type model struct {
	field
	levels  int
	reml    bool
	n       int       // readings
	columns int       // fixed columns beside the mean
	parent  [][]int32 // as in Design
	count   []float64
	value   [][]float64 // [cell][0] mean reading, then the fixed columns
	within  float64
	shift   float64
	scale   float64

	// Memory of the walk: nodes[k] for the groups above level k, the last for cells.
	nodes [][]node
	cross []jet
	off   []jet
}

// node is a group during the walk: the precision of its mean, seen from
// outside, and its mean reading and fixed columns weighted by precision.
type node struct {
	weight jet
	mean   []jet
}

// collect walks from the cells out. It returns the logarithm of the determinant
// of the readings' covariance, the squares and products about group means of
// readings and fixed columns, lower triangle by rows, and the root.
//
// A group's readings act on the rest through their weighted mean alone. Inside a
// group of precision s, adding a common deviation of variance t multiplies the
// determinant by 1 + t s and turns the precision into s/(1 + t s); squares about
// the group's weighted mean are left aside. So one walk gives determinant and
// quadratic form, with no matrix larger than the fixed columns and no difference
// of large numbers.
func (m *model) collect(tau []float64) (logDet jet, cross []jet, root node) {
	d := m.field
	sigma := variable(tau[m.levels], m.levels)
	precision := d.inv(&sigma)
	logSigma := d.log(&sigma)
	d.add(&logDet, float64(m.n), &logSigma)
	width := 1 + m.columns
	m.prepare(width)
	cross = m.cross
	clear(cross)
	d.add(&cross[0], m.within, &precision)

	below := m.nodes[m.levels]
	for c := range below {
		below[c].weight = jet{}
		d.add(&below[c].weight, m.count[c], &precision)
		for i, v := range m.value[c] {
			below[c].mean[i] = constant(v)
		}
	}
	one := constant(1)
	for k := m.levels - 1; k >= 0; k-- {
		t := variable(tau[k], k)
		for g := range below {
			grow := d.mul(&t, &below[g].weight)
			d.add(&grow, 1, &one)
			logGrow := d.log(&grow)
			d.add(&logDet, 1, &logGrow)
			below[g].weight = d.div(&below[g].weight, &grow)
		}
		below = m.gather(below, m.parent[k], m.nodes[k], cross)
	}
	return logDet, cross, below[0]
}

// prepare makes the walk's memory, once.
func (m *model) prepare(width int) {
	if m.nodes != nil {
		return
	}
	m.cross = make([]jet, width*(width+1)/2)
	m.off = make([]jet, width)
	for k := range m.levels + 1 {
		n := 1
		if k > 0 {
			n = len(m.parent[k-1])
		}
		nodes := make([]node, n)
		means := make([]jet, width*n)
		for g := range nodes {
			nodes[g].mean = means[g*width : (g+1)*width]
		}
		m.nodes = append(m.nodes, nodes)
	}
}

// walk is twice the negative log-likelihood, without constants, at variances tau.
// It also gives the mean and its variance.
func (m *model) walk(tau []float64) (f jet, mean, meanVariance float64) {
	d := m.field
	f, cross, root := m.collect(tau)
	logWeight := d.log(&root.weight) // of the mean, then of the fixed columns
	meanVariance = 1 / root.weight.v
	level := root.mean
	for p := m.columns; p >= 1; p-- { // Gaussian elimination, the last column first
		pivot := triangle(cross, p, p)
		logPivot := d.log(pivot)
		d.add(&logWeight, 1, &logPivot)
		u := d.inv(pivot)
		for i := range p {
			ratio := d.mul(triangle(cross, p, i), &u)
			for j := 0; j <= i; j++ {
				part := d.mul(&ratio, triangle(cross, p, j))
				d.add(triangle(cross, i, j), -1, &part)
			}
			part := d.mul(&ratio, &level[p])
			d.add(&level[i], -1, &part)
		}
		meanVariance += level[p].v * level[p].v * u.v
	}
	d.add(&f, 1, &cross[0])
	if m.reml {
		d.add(&f, 1, &logWeight)
	}
	return f, level[0].v, meanVariance
}

func triangle(a []jet, i, j int) *jet { return &a[i*(i+1)/2+j] }

// gather joins groups into those of the level above, adding the squares about
// the new means to cross.
func (m *model) gather(below []node, parent []int32, above []node, cross []jet) []node {
	d := m.field
	width := 1 + m.columns
	for g := range above {
		above[g].weight = jet{}
		clear(above[g].mean)
	}
	for g := range below {
		a := &above[parent[g]]
		d.add(&a.weight, 1, &below[g].weight)
		for i := range width {
			part := d.mul(&below[g].weight, &below[g].mean[i])
			d.add(&a.mean[i], 1, &part)
		}
	}
	for g := range above {
		u := d.inv(&above[g].weight)
		for i := range width {
			above[g].mean[i] = d.mul(&above[g].mean[i], &u)
		}
	}
	off := m.off
	for g := range below {
		a := &above[parent[g]]
		n := 0
		for i := range width {
			off[i] = below[g].mean[i]
			d.add(&off[i], -1, &a.mean[i])
			weighted := d.mul(&below[g].weight, &off[i])
			for j := 0; j <= i; j++ {
				part := d.mul(&weighted, &off[j])
				d.add(&cross[n], 1, &part)
				n++
			}
		}
	}
	return above
}

// logLik is the log-likelihood of the readings as they came, from twice the
// negative one without constants.
func (m *model) logLik(f float64) float64 {
	n := float64(m.n)
	if m.reml {
		n -= float64(1 + m.columns)
	}
	return -0.5 * (f + n*math.Log(2*math.Pi) + 2*n*math.Log(m.scale))
}

// effects solves for the fixed columns' coefficients and their covariance, at
// variances tau, in scaled units.
func (m *model) effects(tau []float64) (beta *mat.VecDense, cov *mat.SymDense, ok bool) {
	_, cross, _ := m.collect(tau)
	q := m.columns
	a := mat.NewSymDense(q, nil)
	b := mat.NewVecDense(q, nil)
	for i := range q {
		for j := 0; j <= i; j++ {
			a.SetSym(i, j, triangle(cross, i+1, j+1).v)
		}
		b.SetVec(i, triangle(cross, i+1, 0).v)
	}
	var chol mat.Cholesky
	if !chol.Factorize(a) {
		return nil, nil, false
	}
	beta, cov = new(mat.VecDense), new(mat.SymDense)
	if chol.SolveVecTo(beta, b) != nil || chol.InverseTo(cov) != nil {
		return nil, nil, false
	}
	return beta, cov, true
}
