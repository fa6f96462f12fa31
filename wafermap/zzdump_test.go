package wafermap

import (
	"bufio"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

func zzPart() int {
	if os.Getenv("ZZFEW") != "" {
		return 3
	}
	return 1
}

func TestZZDump(t *testing.T) {
	path := os.Getenv("ZZDUMP")
	if path == "" {
		t.Skip()
	}
	file, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	w := bufio.NewWriter(file)
	defer file.Close()
	defer w.Flush()
	random := rand.New(rand.NewPCG(77, 5))
	for k := range 420/zzPart() {
		m := makeWafer(random)
		n := len(m.x)
		fail := make([]bool, n)
		p := math.Exp(between(random, math.Log(0.005), math.Log(0.4)))
		patterns := random.IntN(4)
		var ws []*madePattern
		for range patterns {
			kind := madeKinds[random.IntN(len(madeKinds))]
			if q := makePattern(random, m, kind); q != nil {
				ws = append(ws, q)
			}
		}
		for i := range fail {
			r := p
			for _, q := range ws {
				r += (1 - r) * math.Min(0.8, p*between(random, 2, 9)) * q.weight[i]
			}
			fail[i] = random.Float64() < r
		}
		in := SignatureInput{Grid: NewGrid(m.x, m.y), Geometry: m.geo, Fail: fail, Site: m.site, Order: m.order}
		if k%3 == 0 {
			in.ShotColumns, in.ShotRows = 5, 4
		}
		fmt.Fprintf(w, "%d %d %v\n", k, n, len(ws))
		for _, s := range Signatures(in) {
			d := s.Dice
			s.Dice = nil
			h := 0
			for _, v := range d {
				h = h*31 + int(v)
			}
			fmt.Fprintf(w, "  %+v %d %d\n", s, len(d), h)
		}
		if k%6 == 0 {
			value := make([]float64, n)
			for i := range value {
				value[i] = random.NormFloat64() + 2*(m.u[i]*m.u[i]+m.v[i]*m.v[i])
				if fail[i] {
					value[i] += 1
				}
				if random.IntN(50) == 0 {
					value[i] = math.NaN()
				}
			}
			hi, lo := ValueSignatures(in, value, 0.1)
			fmt.Fprintf(w, " V %+v %+v\n", hi, lo)
			s := NewSurfaceBasis(m.geo, m.x, m.y).Fit(value, m.site)
			fmt.Fprintf(w, " S %+v\n", s)
			fmt.Fprintf(w, " L %+v\n", in.Grid.LocalMoran(value, Queen, 0.05))
			fmt.Fprintf(w, " H %+v\n", in.Grid.HotSpots(value, Within(2), 0.05))
			fmt.Fprintf(w, " F %+v\n", in.Grid.FailSpots(fail, Queen, 0.05))
			fmt.Fprintf(w, " A %+v\n", in.Grid.Autocorrelation(value, Queen, Binary))
			fmt.Fprintf(w, " A %+v\n", in.Grid.Autocorrelation(value, Rook, RowStandardised))
			fmt.Fprintf(w, " J %+v\n", in.Grid.JoinCount(fail, Queen))
			fmt.Fprintf(w, " C %+v\n", in.Grid.Clusters(fail, Queen, 3))
			fmt.Fprintf(w, " D %+v\n", in.Grid.DensityClusters(fail, 2.5, 1, 1, 6))
			fmt.Fprintf(w, " Z %+v\n", ZoneYields(m.geo, m.x, m.y, fail, 5, 8))
		}
	}
}
