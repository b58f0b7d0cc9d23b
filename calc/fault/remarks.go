package fault

import (
	"fmt"
	"strings"
)

// Remark is something seen or heard beside the reading that a technician can tick.
type Remark int

// Remarks.
const (
	BubblesAtValve Remark = iota
	NoBubbles
	OilAtGasValve
	DryGasAtValve
	FoamInReservoir
	ReservoirLevelFalls
	SpongyControls
	PumpCyclesFast
	Hammering
	ZeroWhenPumpStops
	FewStrokes
	SuddenDrop
	NoSuddenDrop
	NeedleSticks
	GaugeNotAtZero
	GaugeAtZero
	GaugesAgree
	remarkCount
)

var remarkWords = [remarkCount]string{
	BubblesAtValve:      "bubbles at the valve",
	NoBubbles:           "soap test without bubbles",
	OilAtGasValve:       "oil at the gas valve",
	DryGasAtValve:       "dry gas at the cracked gas valve",
	FoamInReservoir:     "foam in the reservoir",
	ReservoirLevelFalls: "reservoir level falls when pressurised",
	SpongyControls:      "spongy controls",
	PumpCyclesFast:      "pump cycles fast or needle swings",
	Hammering:           "hammering in the system",
	ZeroWhenPumpStops:   "system pressure gone when the pump stops",
	FewStrokes:          "too few applications or strokes",
	SuddenDrop:          "sudden drop when bled down",
	NoSuddenDrop:        "no sudden drop when bled down",
	NeedleSticks:        "needle jumps when the gauge is tapped",
	GaugeNotAtZero:      "gauge not at zero when vented",
	GaugeAtZero:         "gauge at zero when vented",
	GaugesAgree:         "a second gauge on the unit agrees",
}

func (r Remark) String() string {
	if r < 0 || r >= remarkCount {
		return fmt.Sprintf("Remark(%d)", int(r))
	}
	return remarkWords[r]
}

// cured tells whether it is a sign of too little gas, which is over when gas was put in.
func (r Remark) cured() bool {
	switch r {
	case PumpCyclesFast, Hammering, ZeroWhenPumpStops, FewStrokes:
		return true
	}
	return false
}

// Remarks returns all remarks, in the order in which a form would list them.
func Remarks() []Remark {
	out := make([]Remark, remarkCount)
	for i := range out {
		out[i] = Remark(i)
	}
	return out
}

// ParseRemark reads a remark's words.
func ParseRemark(s string) (Remark, error) {
	for r, words := range remarkWords {
		if strings.EqualFold(strings.TrimSpace(s), words) {
			return Remark(r), nil
		}
	}
	return 0, fmt.Errorf("remark %q is not known; write one of: %s", s, strings.Join(remarkWords[:], "; "))
}
