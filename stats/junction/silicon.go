package junction

import "math"

// Physical constants, SI with centimetres (the trade's unit for doping and field).
const (
	charge       = 1.602176634e-19 // elementary charge, C (CODATA 2018, exact)
	boltzmann    = 1.380649e-23    // J/K (CODATA 2018, exact)
	vacuum       = 8.8541878128e-14
	permittivity = 11.7 * vacuum // of silicon, F/cm; 11.9, also in use, moves a breakdown voltage by 1 to 2 %
	um           = 1e-4          // cm
)

// RoomTemperature is the temperature of the reference model and the default, K.
const RoomTemperature = 300.0

// thermal is kT/q in volts.
func thermal(kelvin float64) float64 { return boltzmann * kelvin / charge }

// intrinsic is the intrinsic carrier density of silicon, cm^-3: 1.0e10 at 300 K
// with T^1.5 exp(-Eg/2kT), Eg = 1.12 eV.
//
// Source: from memory; published values at 300 K are 0.97e10 to 1.07e10. It
// doubles about every 9 K near room temperature, as generation currents do.
func intrinsic(kelvin float64) float64 {
	t := kelvin / RoomTemperature
	return 1.0e10 * t * math.Sqrt(t) * math.Exp(1.12/(2*thermal(RoomTemperature))*(1-1/t))
}

// Range of the resistivity conversions. Outside it they return NaN.
const (
	// F723MinDoping and F723MaxDoping bound what is used of ASTM F723, cm^-3: as
	// coded here its two directions part by 7 % near 2e18.
	F723MinDoping, F723MaxDoping = 1e13, 5e17
	// F723MinResistivity and F723MaxResistivity are the same bounds, ohm cm.
	F723MinResistivity, F723MaxResistivity = 0.034, 450.0
)

// ResistivityF723 returns the resistivity in ohm cm at 23 C of phosphorus-doped
// silicon of n cm^-3. It is NaN outside F723MinDoping to F723MaxDoping.
//
// Source: ASTM F723-99, conversion of dopant density to resistivity,
// phosphorus; coefficients from memory, they reproduce the reference table.
func ResistivityF723(n float64) float64 {
	if !(n >= F723MinDoping && n <= F723MaxDoping) {
		return math.NaN()
	}
	return resistivityF723(n)
}

func resistivityF723(n float64) float64 {
	y := math.Log10(n) - 16
	z := (-3.0769 + y*(2.2108+y*(-0.62272+y*0.057501))) / (1 + y*(-0.68157+y*(0.19833-y*0.018376)))
	return 6.242e18 / n * math.Pow(10, z)
}

// DopingF723 returns the density in cm^-3 of phosphorus in silicon of rho ohm cm
// at 23 C. It is NaN outside F723MinResistivity to F723MaxResistivity.
//
// Source: ASTM F723-99, conversion of resistivity to dopant density, phosphorus;
// coefficients from memory. With [ResistivityF723] it closes to 2.1 % between
// 1e13 and 1e17 (the standard states 4.5 %).
func DopingF723(rho float64) float64 {
	if !(rho >= F723MinResistivity && rho <= F723MaxResistivity) {
		return math.NaN()
	}
	return dopingF723(rho)
}

func dopingF723(rho float64) float64 {
	x := math.Log10(rho)
	z := (-3.1083 + x*(-3.2626+x*(-1.2196-x*0.13923))) / (1 + x*(1.0265+x*(0.38755+x*0.041833)))
	return 6.242e18 / rho * math.Pow(10, z)
}

// ResistivityThurber returns the resistivity in ohm cm at 300 K of
// phosphorus-doped silicon of n cm^-3; NaN outside 1e13 to 1e20.
//
// Source: Thurber, Mattis, Liu and Filliben, J. Electrochem. Soc. 127 (1980)
// 1807, the 300 K fit; coefficients from memory. It reads 3 % above F723 because
// 300 K is 3.85 K above 23 C.
func ResistivityThurber(n float64) float64 {
	if !(n >= 1e13 && n <= 1e20) {
		return math.NaN()
	}
	y := math.Log10(n) - 16
	z := (3.0652 + y*(-2.1853+y*(0.61080-y*0.056189))) / (1 + y*(-0.67642+y*(0.19542-y*0.018100)))
	return 1 / (charge * n * math.Pow(10, z))
}

// MobilityElectrons returns the electron mobility in cm^2/Vs at n dopants per
// cm^3 and a temperature in kelvin.
//
//	mu = 88 t^-0.57 + 1252 t^-2.33 / (1 + (n / 1.26e17 t^2.4)^(0.88 t^-0.146)),  t = T/300 K
//
// NaN for n not above 0 or a temperature outside 200 to 500 K, the authors' range.
//
// Source: Arora, Hauser and Roulston, IEEE Trans. Electron Devices 29 (1982) 292.
// Reference density and exponent from memory. Against Thurber it is 6 % low in
// resistivity terms near 4e16 and 6 % high at 1e14.
func MobilityElectrons(n, kelvin float64) float64 {
	return arora(n, kelvin, 88, 1252, 1.26e17)
}

// MobilityHoles is [MobilityElectrons] for holes, with 54.3, 407 and 2.35e17.
//
// Source: as for electrons.
func MobilityHoles(n, kelvin float64) float64 {
	return arora(n, kelvin, 54.3, 407, 2.35e17)
}

func arora(n, kelvin, low, lattice, nref float64) float64 {
	if !(n > 0) || !(kelvin >= 200 && kelvin <= 500) {
		return math.NaN()
	}
	if kelvin == RoomTemperature {
		return low + lattice/(1+math.Pow(n/nref, 0.88))
	}
	t := kelvin / RoomTemperature
	expo := 0.88 * math.Pow(t, -0.146)
	return low*math.Pow(t, -0.57) + lattice*math.Pow(t, -2.33)/(1+math.Pow(n/(nref*math.Pow(t, 2.4)), expo))
}

// MobilityCaugheyThomas returns the electron mobility in cm^2/Vs at 300 K:
// 65 + 1265 / (1 + (n/8.5e16)^0.72). It stands beside [MobilityElectrons] to show
// what one conversion less is worth: 3 % at 1e15, 9 % at 1e16.
//
// Source: Caughey and Thomas, Proc. IEEE 55 (1967) 2192; constants from memory.
func MobilityCaugheyThomas(n float64) float64 {
	if !(n > 0) {
		return math.NaN()
	}
	return 65 + 1265/(1+math.Pow(n/8.5e16, 0.72))
}

// narrowing is the apparent narrowing of the band gap at n dopants per cm^3, eV.
//
// Source: Slotboom and de Graaff, Solid-State Electron. 19 (1976) 857; from
// memory. It is what makes a heavily doped base pass more current than its
// doping alone would let it.
func narrowing(n float64) float64 {
	l := math.Log(n / 1e17)
	return 0.009 * (l + math.Sqrt(float64(l*l)+0.5))
}
