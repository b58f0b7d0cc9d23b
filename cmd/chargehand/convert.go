package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"

	"github.com/spf13/cobra"
)

func addJSON(cmd *cobra.Command, asJSON *bool) {
	cmd.Flags().BoolVar(asJSON, "json", false, "print JSON, with the unit in each name")
}

func writeJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetIndent("", "  ")
	return e.Encode(v)
}

// conversion is a reading brought to another temperature, and the shape of convert --json.
type conversion struct {
	Gas          string  `json:"gas"`
	ReadingPsi   float64 `json:"reading_psi"`
	AtK          float64 `json:"at_k"`
	ToK          float64 `json:"to_k"`
	AmbientPsi   float64 `json:"ambient_psi"` // absolute
	CorrectedPsi float64 `json:"corrected_psi"`
	IdealPsi     float64 `json:"ideal_psi"`
	DensityKgM3  float64 `json:"density_kg_m3"`
	Z            float64 `json:"z"` // at the reading
	ZAtTo        float64 `json:"z_at_to"`
	UncertaintyK float64 `json:"density_relative_uncertainty_k2"`

	corrected, ideal quantity.GaugePressure
}

// convert keeps the gas volume, hence the density, fixed. The ideal figure is p T2/T1, for comparison only.
func convert(m *gas.Model, reading quantity.GaugePressure, at, to quantity.Temperature, ambient quantity.Pressure) (conversion, error) {
	p := reading.Abs(ambient)
	rho, err := m.Density(at, p)
	if err != nil {
		return conversion{}, err
	}
	before, err := m.State(at, rho)
	if err != nil {
		return conversion{}, err
	}
	after, err := m.State(to, rho)
	if err != nil {
		return conversion{}, err
	}
	corrected, err := calc.Correct(m, p, at, to)
	if err != nil {
		return conversion{}, err
	}
	c := conversion{
		Gas: m.Name(), AtK: float64(at), ToK: float64(to), DensityKgM3: float64(rho), Z: before.Z, ZAtTo: after.Z,
		UncertaintyK: m.RelativeUncertainty(at, p),
		corrected:    corrected.Gauge(ambient), ideal: ideal(reading, at, to, ambient),
	}
	psi := func(g quantity.GaugePressure) float64 {
		v, psiErr := g.InUnit("psi")
		err = errors.Join(err, psiErr)
		return v
	}
	c.ReadingPsi, c.CorrectedPsi, c.IdealPsi = psi(reading), psi(c.corrected), psi(c.ideal)
	c.AmbientPsi = psi(quantity.GaugePressure(ambient))
	return c, err
}

// ideal is the ideal gas's answer at fixed volume: absolute pressure goes with absolute temperature.
func ideal(reading quantity.GaugePressure, at, to quantity.Temperature, ambient quantity.Pressure) quantity.GaugePressure {
	return calc.IdealCorrect(reading.Abs(ambient), at, to).Gauge(ambient)
}

func newConvert() *cobra.Command {
	var (
		asJSON  bool
		at      = gasTemperature()
		to      = gasTemperature()
		ambient = absolutePressure()
		height  = elevation()
		name    string
	)
	cmd := &cobra.Command{
		Use:     "convert PRESSURE --at TEMPERATURE --to TEMPERATURE",
		Short:   "Bring a gauge reading to another gas temperature at fixed volume",
		Example: "  chargehand convert 1180psi --at 41F --to 70F\n  chargehand convert 81.4bar --at -12C --to 20C --elevation 6200ft",
		Args: usageArgs(func(_ *cobra.Command, args []string) error {
			if len(args) != 1 {
				return usageError(fmt.Sprintf("convert takes one gauge pressure and got %d: %q", len(args), args),
					"Write one, such as 'chargehand convert 1180psi --at 41F --to 70F'")
			}
			return nil
		}),
		RunE: func(cmd *cobra.Command, args []string) error {
			reading := gaugePressure()
			if err := reading.Set(args[0]); err != nil {
				var v *valueError
				if errors.As(err, &v) {
					return usageError("gauge reading "+v.what, v.todo)
				}
				return err
			}
			if err := fill(cmd, nil, needs("at", "to")...); err != nil {
				return err
			}
			if ambient.written.Unit != "" && height.written.Unit != "" {
				return usageError(fmt.Sprintf("--ambient %q and --elevation %q both say what the air is", ambient, height), "Give one of them")
			}
			m, err := gas.ByName(name)
			if err != nil {
				return usageError(fmt.Sprintf("--gas: %q is not a gas with an equation here", name), "Write nitrogen or air")
			}
			outside, from := quantity.StandardAtmosphere, "standard atmosphere at sea level"
			if ambient.written.Unit != "" {
				outside, from = ambient.value, "as given"
			} else if height.written.Unit != "" {
				from = "standard atmosphere at " + height.String()
				if outside, err = quantity.StandardAtmosphereAt(height.value); err != nil {
					return err
				}
			}
			if outside < 10e3 || outside > 120e3 { // no field has such air; an altimeter or gauge figure may
				return usageError(fmt.Sprintf("--ambient: %q is not the pressure of air in the open", ambient), "Write the station pressure, absolute, such as 24.9inHg or 1013.25hPa")
			}
			c, err := convert(m, reading.value, at.value, to.value, outside)
			var span *quantity.RangeError
			if errors.As(err, &span) {
				if _, inputErr := m.Density(at.value, reading.value.Abs(outside)); inputErr != nil {
					return usageError(fmt.Sprintf("gauge reading %q: %v", args[0], err), "Give a pressure inside that range")
				}
				return couldNot(fmt.Errorf("%q at %s brought to %s: %w", args[0], at, to, err), "Give a temperature nearer to that of the reading")
			} else if err != nil {
				return couldNot(err, "Report the values: no input within the ranges should do this")
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), c)
			}
			return c.print(cmd.OutOrStdout(), reading.written.Unit, reading.String(), at.String(), to.String(), from)
		},
	}
	f := cmd.Flags()
	f.Var(at, "at", "gas temperature at the reading, such as 41F or -12C")
	f.Var(to, "to", "gas temperature to bring it to, such as 70F or 20C")
	f.Var(ambient, "ambient", "absolute pressure of the air (station pressure), such as 29.92inHg")
	f.Var(height, "elevation", "field elevation, for the standard atmosphere there, such as 6200ft")
	f.StringVar(&name, "gas", "nitrogen", "nitrogen or air")
	addJSON(cmd, &asJSON)
	return cmd
}

func (c conversion) print(w io.Writer, unit, reading, at, to, ambientFrom string) error {
	corrected, err := c.corrected.InUnit(unit)
	if err != nil {
		return err
	}
	idealIn, err := c.ideal.InUnit(unit)
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(w, `reading     %s at %s, %s
corrected   %.5g %s at %s
ideal gas   %.5g %s (for comparison; differs by %+.3g %s)
density     %.5g kg/m3, fixed volume
Z           %.5f at %s, %.5f at %s
ambient     %.4f psi absolute, %s
valid       200 K to 420 K, 0.05 MPa to 70 MPa; equation of state good for %.2g %% in density (k = 2)
`, reading, at, c.Gas, corrected, unit, to, idealIn, unit, idealIn-corrected, unit, c.DensityKgM3, c.Z, at, c.ZAtTo, to,
		c.AmbientPsi, ambientFrom, 100*c.UncertaintyK)
	return err
}
