package main

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
)

// runVolume turns one weighing into one volume, every input a flag.
func runVolume(_ context.Context, args []string, io stdio) int {
	f := newFlags("volume", "Turns one weighing of water into a volume.", io.err)
	in := calc.DefaultInputs()
	numbers := map[string]*decimal.Number{}
	number := func(name, usual, use string) {
		n := decimal.Number{}
		if usual != "" {
			if err := n.UnmarshalText([]byte(usual)); err != nil {
				panic(err) // a constant below
			}
		}
		numbers[name] = &n
		f.TextVar(&n, name, n, use)
	}
	number("mass", "", "net mass of the water in air, `g` (needed)")
	number("water-temp", "", "temperature of the water, `°C` (needed)")
	number("air-temp", "", "temperature of the air, `°C`; default: as the water")
	number("pressure", "1013.25", "pressure of the air, `hPa`")
	number("humidity", "50", "relative humidity of the air, `%`")
	number("co2", "0.0004", "mole `fraction` of carbon dioxide in the air")
	number("reference-temp", "20", "reference temperature of the ware, `°C`")
	number("expansion", "9.9e-6", "cubic expansion of the ware, `1/°C`")
	number("weight-density", "8000", "density of the balance's adjustment weights, `kg/m³`")
	f.StringVar(&in.WaterDensity, "water-density", in.WaterDensity, "formula for the density of water")
	f.StringVar(&in.AirDensity, "air-density", in.AirDensity, "formula for the density of air")
	asJSON := f.Bool("json", false, "print JSON")
	if code, done := parse(f, args); done {
		return code
	}
	if code := checkVolumeCall(f, numbers, io); code != exitDone {
		return code
	}
	in.CO2Fraction, in.ReferenceTempC = numbers["co2"].Float(), numbers["reference-temp"].Float()
	in.ExpansionPerC, in.WeightDensityKgM3 = numbers["expansion"].Float(), numbers["weight-density"].Float()
	if err := in.Check(); err != nil {
		return complain(io.err, err)
	}
	v, err := calc.DeliveryVolume(in, calc.Delivery{
		After: calc.Weighing{MassG: numbers["mass"].Float()}, Water: calc.WaterTemp{WaterTempC: numbers["water-temp"].Float()},
		Ambient: calc.Ambient{AirTempC: numbers["air-temp"].Float(), PressureHPa: numbers["pressure"].Float(), HumidityPct: numbers["humidity"].Float()},
	})
	if err != nil {
		return complain(io.err, err)
	}
	return printVolume(io, in, v, *asJSON)
}

// checkVolumeCall says what is missing, and lets the air be as warm as the water.
func checkVolumeCall(f *flag.FlagSet, numbers map[string]*decimal.Number, io stdio) int {
	if f.NArg() > 0 {
		fmt.Fprintf(io.err, "tenthmark volume takes flags only; %q is none.\n", f.Arg(0))
		return exitUsage
	}
	for _, name := range []string{"mass", "water-temp"} {
		if !numbers[name].IsSet() {
			fmt.Fprintf(io.err, "tenthmark volume needs --%s. `tenthmark volume -h` shows every input.\n", name)
			return exitUsage
		}
	}
	if !numbers["air-temp"].IsSet() {
		*numbers["air-temp"] = *numbers["water-temp"]
	}
	return exitDone
}

func printVolume(io stdio, in calc.Inputs, v calc.Volume, asJSON bool) int {
	if !asJSON {
		fmt.Fprintf(io.out, "volume at delivery       %.6f mL\nvolume at %g °C          %.6f mL\ndensity of water         %.5f kg/m³\ndensity of air           %.6f kg/m³\n",
			v.VolumeML, in.ReferenceTempC, v.Volume20ML, v.WaterDensityKgM3, v.AirDensityKgM3)
		return exitDone
	}
	b, err := json.Marshal(map[string]any{
		"net_mass_g": v.NetMassG, "air_density_kg_m3": v.AirDensityKgM3, "water_density_kg_m3": v.WaterDensityKgM3,
		"volume_mL": v.VolumeML, "volume_20C_mL": v.Volume20ML, "reference_temp_C": in.ReferenceTempC,
	})
	if err != nil {
		return complain(io.err, err)
	}
	fmt.Fprintf(io.out, "%s\n", b)
	return exitDone
}
