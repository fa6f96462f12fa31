package wafermap

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"runtime"
	"strconv"
	"sync"
	"testing"
)

// manyMaps is how many maps each of the tests below makes: 600 with KNEEPOINT_LONG=1, as many
// as it says when it is a larger number (4,000 take the better part of an hour).
func manyMaps() int {
	switch n, _ := strconv.Atoi(os.Getenv("KNEEPOINT_LONG")); {
	case n > 1:
		return n
	case n == 1:
		return 600
	}
	return 120
}

// eachMap runs work on maps 0 to n-1 on all cores; results must go to a place of their own.
func eachMap(n int, work func(k int)) {
	var group sync.WaitGroup
	next := make(chan int)
	for range runtime.GOMAXPROCS(0) {
		group.Add(1)
		go func() {
			defer group.Done()
			for k := range next {
				work(k)
			}
		}()
	}
	for k := range n {
		next <- k
	}
	close(next)
	group.Wait()
}

// madeRate is a fail rate from 0.2 % to 40 %, half of them drawn evenly and half evenly in
// the logarithm.
func madeRate(random *rand.Rand) float64 {
	if random.IntN(2) == 0 {
		return between(random, 0.002, 0.4)
	}
	return 0.002 * math.Exp(random.Float64()*math.Log(200))
}

func (m madeWafer) input(fail []bool) SignatureInput {
	return SignatureInput{Grid: NewGrid(m.x, m.y), Geometry: m.geo, Fail: fail, Site: m.site, Order: m.order}
}

func patterned(list []Signature) (out []Signature) {
	for _, s := range list {
		if s.Kind != "random" && s.Kind != "none" {
			out = append(out, s)
		}
	}
	return out
}

// On random maps at most 2 % may get any signature but random, or none where hardly a die
// fails.
func TestRandomMapsAreCalledRandom(t *testing.T) {
	n := manyMaps()
	type outcome struct {
		text  string
		fails int
		kind  string
		p     float64
	}
	out := make([]outcome, n)
	eachMap(n, func(k int) {
		random := rand.New(rand.NewPCG(20240501, uint64(k)))
		m := makeWafer(random)
		rate := madeRate(random)
		if k%4 == 0 { // some with what a lot brings
			m.geo = FindGeometry(m.x, m.y, Known{})
		}
		in := m.input(makeFails(random, len(m.x), rate, nil, nil, false))
		if k%3 == 0 {
			in.ShotColumns, in.ShotRows = 2+random.IntN(10), 2+random.IntN(10)
		}
		got := Signatures(in)
		o := outcome{kind: got[0].Kind, p: got[0].PValue}
		for _, f := range in.Fail {
			if f {
				o.fails++
			}
		}
		if found := patterned(got); len(found) > 0 {
			o.text = fmt.Sprintf("map %d, %d dice (%s), %d fails: %s", k, len(m.x), m.about, o.fails, found[0].Kind)
		}
		out[k] = o
	})
	alarms, low := 0, 0
	kinds := map[string]int{}
	for _, o := range out {
		if o.text != "" {
			t.Log(o.text)
			alarms++
			kinds[o.kind]++
		} else if o.fails >= judgedFails != (o.kind == "random") {
			t.Errorf("%d fails without pattern are called %s", o.fails, o.kind)
		}
		if o.p <= 0.1 {
			low++
		}
	}
	t.Logf("%d of %d random maps get a signature (%.2f %%): %v; the p-value is 0.1 or less on %.1f %%", alarms, n, 100*float64(alarms)/float64(n), kinds, 100*float64(low)/float64(n))
	// 2 %, with three standard errors for few maps
	if limit := 0.02 * float64(n); float64(alarms) > limit+3*math.Sqrt(limit)*float64(boolean(n < 1000)) {
		t.Errorf("%d of %d random maps get a signature", alarms, n)
	}
}

func boolean(b bool) int {
	if b {
		return 1
	}
	return 0
}
