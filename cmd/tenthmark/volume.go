package main

import (
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"strconv"
	"strings"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
)

// volumeCall is what the flags of `tenthmark volume` say.
type volumeCall struct {
	*flag.FlagSet
	in                                      calc.Inputs
	mass, waterTemp, airTemp, hPa, humidity decimal.Number
	asJSON                                  *bool
}

// numberFlag is a number of the inputs block as a flag.
type numberFlag struct {
	name, use string
	where     *float64
}

// Set reads the number by our own grammar.
func (n numberFlag) Set(text string) error {
	v, err := decimal.ParseScientific(text)
	if err == nil {
		*n.where = v.Float()
	}
	return err
}

func (n numberFlag) String() string {
	if n.where == nil {
		return ""
	}
	return strconv.FormatFloat(*n.where, 'g', -1, 64)
}

func newVolumeCall(w io.Writer) *volumeCall {
	c := &volumeCall{FlagSet: newFlags("volume", "Turns one weighing of water into a volume with its uncertainty. Uncertainties are standard uncertainties.", w), in: calc.DefaultInputs()}
	c.in.UReadingML, c.in.UDeliveryML = 1e-9, 0 // there is no reading and no drop in a weighing
	c.TextVar(&c.mass, "mass", c.mass, "net mass of the water in air, `g` (needed)")
	c.TextVar(&c.waterTemp, "water-temp", c.waterTemp, "temperature of the water, `°C` (needed)")
	c.TextVar(&c.airTemp, "air-temp", c.airTemp, "temperature of the air, `°C`; default: as the water")
	c.TextVar(&c.hPa, "pressure", decimal.MustParse("1013.25"), "pressure of the air, `hPa`")
	c.TextVar(&c.humidity, "humidity", decimal.MustParse("50"), "relative humidity of the air, `%`")
	c.StringVar(&c.in.WaterDensity, "water-density", c.in.WaterDensity, "`formula` for the density of water: "+strings.Join(calc.WaterFormulas(), ", "))
	c.StringVar(&c.in.AirDensity, "air-density", c.in.AirDensity, "`formula` for the density of air: "+strings.Join(calc.AirFormulas(), ", "))
	for _, n := range []numberFlag{
		{"co2", "mole `fraction` of carbon dioxide in the air", &c.in.CO2Fraction},
		{"reference-temp", "reference temperature of the ware, `°C`", &c.in.ReferenceTempC},
		{"expansion", "cubic expansion of the ware, `1/°C`", &c.in.ExpansionPerC},
		{"weight-density", "density of the balance's adjustment weights, `kg/m³`", &c.in.WeightDensityKgM3},
		{"u-weighing", "u of each of the two weighings, `g`", &c.in.UWeighingG},
		{"u-water-temp", "u of the reading of the water's temperature, `°C`", &c.in.UWaterTempC},
		{"u-thermometer", "u of the water thermometer, `°C`", &c.in.UThermometerC},
		{"u-air-temp", "u of the air's temperature, `°C`", &c.in.UAirTempC},
		{"u-pressure", "u of the air's pressure, `hPa`", &c.in.UPressureHPa},
		{"u-humidity", "u of the air's humidity, `%`", &c.in.UHumidityPct},
		{"u-water-density", "relative u of the density of water", &c.in.UWaterDensityRel},
		{"u-air-density", "relative u of the formula for air", &c.in.UAirDensityRel},
		{"u-expansion", "relative u of the ware's expansion", &c.in.UExpansionRel},
		{"u-sensitivity", "relative u of the balance's sensitivity", &c.in.USensitivityRel},
		{"u-weight-density", "u of the weights' density, `kg/m³`", &c.in.UWeightDensityKgM3},
		{"coverage", "coverage `probability`", &c.in.CoverageProbability},
	} {
		c.Var(n, n.name, n.use)
	}
	c.asJSON = c.Bool("json", false, "print JSON")
	return c
}

// runVolume turns one weighing into one volume, every input a flag.
func runVolume(_ context.Context, args []string, io stdio) int {
	c := newVolumeCall(io.err)
	if code, done := parse(c.FlagSet, args); done {
		return code
	}
	if err := c.check(); err != nil {
		return misuse(io.err, err)
	}
	if err := c.in.Check(); err != nil {
		return complain(io.err, err)
	}
	v, err := calc.VolumeWithBudget(c.in, calc.Delivery{
		Before: calc.Weighing{Fact: 1}, After: calc.Weighing{Fact: 2, MassG: c.mass.Float()}, Water: calc.WaterTemp{WaterTempC: c.waterTemp.Float()},
		Ambient: calc.Ambient{AirTempC: c.airTemp.Float(), PressureHPa: c.hPa.Float(), HumidityPct: c.humidity.Float()},
	})
	if err != nil {
		return complain(io.err, err)
	}
	return printVolume(io, c.in, v, *c.asJSON)
}

// check says what is missing, and lets the air be as warm as the water.
func (c *volumeCall) check() error {
	switch {
	case c.NArg() > 0:
		return fmt.Errorf("tenthmark volume takes flags only; %q is none", c.Arg(0))
	case !c.mass.IsSet():
		return errors.New("tenthmark volume needs --mass; `tenthmark volume -h` shows every input")
	case !c.waterTemp.IsSet():
		return errors.New("tenthmark volume needs --water-temp; `tenthmark volume -h` shows every input")
	}
	if !c.airTemp.IsSet() {
		c.airTemp = c.waterTemp
	}
	return nil
}

func printVolume(io stdio, in calc.Inputs, v calc.VolumeBudget, asJSON bool) int {
	if !asJSON {
		fmt.Fprintf(io.out, "volume at delivery       %.6f mL\nvolume at %g °C          %.6f mL\nexpanded uncertainty     %.6f mL (k = %.3f)\ndensity of water         %.5f kg/m³\ndensity of air           %.6f kg/m³\n",
			v.VolumeML, in.ReferenceTempC, v.Volume20ML, v.Expanded, v.K, v.WaterDensityKgM3, v.AirDensityKgM3)
		return exitDone
	}
	b, err := json.Marshal(map[string]any{
		"net_mass_g": v.NetMassG, "air_density_kg_m3": v.AirDensityKgM3, "water_density_kg_m3": v.WaterDensityKgM3,
		"volume_mL": v.VolumeML, "volume_20C_mL": v.Volume20ML, "u_mL": v.U, "k": v.K, "U_mL": v.Expanded,
		"inputs": in, "budget": v.Lines,
	})
	if err != nil {
		return complain(io.err, err)
	}
	fmt.Fprintf(io.out, "%s\n", b)
	return exitDone
}
