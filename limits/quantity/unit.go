// Package quantity is a number with its unit: parse, print, convert.
//
// Inside the program every quantity is a float64 in the SI unit without
// prefix, carried by a type of its own (Voltage, Current, Frequency …), so that
// a voltage cannot be added to a current. Levels in decibels are a separate type
// and never mix with linear values.
package quantity

import (
	"reflect"
)

// Unit is one dimension the program knows, with the SI unit it is held in.
type Unit struct {
	Symbol  string // SI symbol without prefix, as printed: "V", "V/√Hz"
	Name    string // what such a quantity is called in a message: "voltage"
	Example string // what a correct entry looks like
	prefix  bool   // whether SI prefixes are used when printing
}

// The units the program's files and readings use.
var (
	Volt            = Unit{"V", "voltage", "5 V", true}
	Ampere          = Unit{"A", "current", "40 mA", true}
	Hertz           = Unit{"Hz", "frequency", "40 Hz", true}
	Second          = Unit{"s", "time", "1.5 s", true}
	Metre           = Unit{"m", "length", "0.20 mm", true}
	Ohm             = Unit{"Ω", "resistance", "2 Ω", true}
	VoltPerRootHz   = Unit{"V/√Hz", "noise density", "0.4 µV/√Hz", true}
	DecibelUnit     = Unit{"dB", "level difference", "-3 dB", false}
	One             = Unit{"1", "number", "200", false}
	Celsius         = Unit{"°C", "temperature", "23 °C", false}
	RadianUnit      = Unit{"rad", "angle", "0.5 rad", false}
	MetrePerVolt    = Unit{"m/V", "displacement per volt", "0.5 mm/V", true}
	MetrePerSecond  = Unit{"m/s", "speed", "1.4 m/s", true}
	PerVoltUnit     = Unit{"1/V", "relative change per volt", "6 %/V", false}
	MetrePerSecond2 = Unit{"m/s²", "acceleration", "9.81 m/s²", true}
)

// The linear quantities, each in its SI unit, and the level difference.
type (
	Voltage             float64 // V
	Current             float64 // A
	Frequency           float64 // Hz
	Time                float64 // s
	Length              float64 // m
	Resistance          float64 // Ω
	NoiseDensity        float64 // V/√Hz
	Ratio               float64 // dimensionless; 0.004 is written 0.4 %
	Temperature         float64 // °C
	Angle               float64 // rad
	DisplacementPerVolt float64 // m/V
	Speed               float64 // m/s
	PerVolt             float64 // 1/V, relative change per volt; 0.06 is written 6 %/V
	Decibel             float64 // dB, a ratio's level; never added to a linear value
)

var unitOfType = map[reflect.Type]Unit{
	reflect.TypeFor[Voltage]():             Volt,
	reflect.TypeFor[Current]():             Ampere,
	reflect.TypeFor[Frequency]():           Hertz,
	reflect.TypeFor[Time]():                Second,
	reflect.TypeFor[Length]():              Metre,
	reflect.TypeFor[Resistance]():          Ohm,
	reflect.TypeFor[NoiseDensity]():        VoltPerRootHz,
	reflect.TypeFor[Ratio]():               One,
	reflect.TypeFor[Temperature]():         Celsius,
	reflect.TypeFor[Angle]():               RadianUnit,
	reflect.TypeFor[DisplacementPerVolt](): MetrePerVolt,
	reflect.TypeFor[Speed]():               MetrePerSecond,
	reflect.TypeFor[Decibel]():             DecibelUnit,
	reflect.TypeFor[PerVolt]():             PerVoltUnit,
}

// UnitOfType gives the unit a Go type is held in, and whether it is a quantity.
func UnitOfType(t reflect.Type) (Unit, bool) {
	u, ok := unitOfType[t]
	return u, ok
}

// UnitOf gives the unit of the quantity type T.
func UnitOf[T ~float64]() Unit {
	u, ok := unitOfType[reflect.TypeFor[T]()]
	if !ok {
		panic("quantity: " + reflect.TypeFor[T]().String() + " is not a quantity type")
	}
	return u
}

// UnitBySymbol finds a unit by its SI symbol, as readings carry it.
func UnitBySymbol(symbol string) (Unit, bool) {
	for _, u := range []Unit{Volt, Ampere, Hertz, Second, Metre, Ohm, VoltPerRootHz, DecibelUnit,
		One, Celsius, RadianUnit, MetrePerVolt, MetrePerSecond, MetrePerSecond2, PerVoltUnit} {
		if u.Symbol == symbol {
			return u, true
		}
	}
	return Unit{}, false
}

func (v Voltage) String() string             { return Print(float64(v), Volt) }
func (v Current) String() string             { return Print(float64(v), Ampere) }
func (v Frequency) String() string           { return Print(float64(v), Hertz) }
func (v Time) String() string                { return Print(float64(v), Second) }
func (v Length) String() string              { return Print(float64(v), Metre) }
func (v Resistance) String() string          { return Print(float64(v), Ohm) }
func (v NoiseDensity) String() string        { return Print(float64(v), VoltPerRootHz) }
func (v Ratio) String() string               { return Print(float64(v), One) }
func (v Temperature) String() string         { return Print(float64(v), Celsius) }
func (v Angle) String() string               { return Print(float64(v), RadianUnit) }
func (v DisplacementPerVolt) String() string { return Print(float64(v), MetrePerVolt) }
func (v Speed) String() string               { return Print(float64(v), MetrePerSecond) }
func (v PerVolt) String() string             { return Print(float64(v), PerVoltUnit) }
func (v Decibel) String() string             { return Print(float64(v), DecibelUnit) }

// Percent prints a ratio in percent: 0.004 is "0.4 %".
func (v Ratio) Percent() string { return trimNumber(float64(v)*100, 7) + " %" }
