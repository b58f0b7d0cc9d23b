package plan

import "example.org/chargehand/calc/quantity"

// Ratings are the highest pressures that the parts between bottle and unit are rated for; for the gauge the upper end of its
// span. Zero means not stated.
type Ratings struct{ Valve, Hose, Regulator, Gauge quantity.GaugePressure }

// Rating is the finding on one part.
type Rating struct {
	Part  string // "valve", "hose", "regulator" or "gauge"
	Rated quantity.GaugePressure
	Sees  quantity.GaugePressure // the highest it can meet
	State RatingState
}

// RatingState is whether a part is rated for what it can meet.
type RatingState int

const (
	NotStated RatingState = iota
	TooLow
	Enough
)

func (s RatingState) String() string {
	switch s {
	case NotStated:
		return "not stated"
	case TooLow:
		return "rated too low"
	case Enough:
		return "rated high enough"
	}
	return "no rating state"
}

// against holds the valve and the gauge against the highest reading of the unit, the regulator against the bottle, and the hose against
// the higher of both: a regulator that fails lets the bottle's pressure through.
func (r Ratings) against(dial, bottle quantity.GaugePressure) []Rating {
	of := func(part string, rated, sees quantity.GaugePressure) Rating {
		state := Enough
		switch {
		case !(rated > 0):
			state = NotStated
		case rated < sees:
			state = TooLow
		}
		return Rating{part, rated, sees, state}
	}
	return []Rating{of("valve", r.Valve, dial), of("hose", r.Hose, max(dial, bottle)), of("regulator", r.Regulator, bottle), of("gauge", r.Gauge, dial)}
}

// OxygenServicingRate is 200 psi a minute, the fastest filling of oxygen bottles in Army aircraft manuals (TM 55-1510-220-10,
// TM 55-1510-222-10, TM 1-1510-218-10). It is a precedent for another gas and no limit of ours: the manual of the unit rules.
func OxygenServicingRate() Rate {
	g, _ := quantity.Written{Mantissa: 200, Unit: "psi"}.Gauge() // a unit of the table, so no error
	return PerMinute(g)
}

// Caution is a short standing warning and where it comes from.
type Caution struct{ Text, Source string }

// Cautions returns what to keep in sight while charging, in the order of the work.
func Cautions() []Caution {
	return []Caution{
		{"Relieve the hydraulic pressure completely: a gauge on a unit with fluid in it reads the fluid.", "NAVEDTRA 14315 ch. 12"},
		{"Dry nitrogen only, from a bottle whose label you have read. Never oxygen.", "TM 1-1500-204-23-1 para 3-9"},
		{"Regulator and hose rated above the bottle's pressure; hose not stretched.", "NAVEDTRA 14019"},
		{"Stand clear of the valve's axis, face and eyes covered.", "common practice, no source"},
		{"Know the pressures in the unit and in every bottle before a valve is opened; open it slowly.", "NAVEDTRA 14019"},
		{"Fill slowly to limit heating.", "TM 1-1500-204-23-1 para 3-9d"},
		{"Stop at the hot stop, close, let it settle, read again. Do not overcharge.", "TM 1-1500-204-23-1 para 3-9e"},
		{"Vent the hose before it comes off. Never blow gas at people or clothes.", "NAVEDTRA 14019"},
		{"Nitrogen displaces air in closed spaces and gives no warning.", "NAVEDTRA 14105 ch. 11"},
		{"Look for leaks with soap solution, never with a bare hand.", "NAVEDTRA 14018; trade press"},
	}
}
