package synth

import (
	"math/bits"

	"gonum.org/v1/gonum/mathext"
)

// key names one place in the tree of random numbers. A number is a pure
// function of its key, never of what was drawn before it.
type key uint64

// The branches under a seed. A new kind of number gets a new branch, so that
// lots made earlier stay what they were.
const (
	branchLot     = 1 // latents, lot level
	branchWafer   = 2 // latents, wafer level and smooth shape
	branchDie     = 3 // everything of one die
	branchSite    = 4 // tester offsets by site
	branchCause   = 5 // what a cause draws once a wafer
	branchPhysics = 6 // variants of the device model
	branchSpec    = 7 // what [Maker.Random] draws once a lot
)

// Numbers of one die, by offset.
const (
	dieLatent  = 0       // + latent
	dieNoise   = 1 << 16 // + attempt, then the test's name
	dieMissing = 2 << 16 // + attempt, then the test's name
	dieRetest  = 3 << 16
	dieCause   = 4 << 16 // + cause, then attempt
)

// mix is the finaliser of splitmix64 (Steele, Lea and Flood 2014, variant 13
// of Stafford's mixers; constants from memory, checked by the tests of
// uniformity and independence).
func mix(z uint64) uint64 {
	z ^= z >> 30
	z *= 0xbf58476d1ce4e5b9
	z ^= z >> 27
	z *= 0x94d049bb133111eb
	return z ^ z>>31
}

const golden = 0x9e3779b97f4a7c15

// at returns the key of child n.
func (k key) at(n uint64) key {
	// The rotation keeps at(a).at(b) apart from at(b).at(a).
	return key(mix(bits.RotateLeft64(uint64(k), 23) + (n+1)*golden))
}

// uniform is in (0, 1), never either end.
func (k key) uniform() float64 {
	return (float64(mix(uint64(k)+golden)>>11) + 0.5) / (1 << 53)
}

// normal has mean 0 and standard deviation 1.
func (k key) normal() float64 { return mathext.NormalQuantile(k.uniform()) }

func root(seed uint64) key { return key(mix(seed + golden)) }

// dieKey depends on the die's coordinates, not on its number in the grid, so
// that a wider edge exclusion leaves the other dice as they were.
func dieKey(seed uint64, wafer int, x, y int32) key {
	return root(seed).at(branchDie).at(uint64(wafer)).at(uint64(uint32(x))<<32 | uint64(uint32(y)))
}

// nameKey folds a name to a number (FNV-1a, 64 bit).
func nameKey(s string) uint64 {
	h := uint64(14695981039346656037)
	for i := range len(s) {
		h ^= uint64(s[i])
		h *= 1099511628211
	}
	return h
}
