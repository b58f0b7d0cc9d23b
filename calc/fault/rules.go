package fault

import "fmt"

// Cause is what may lie behind a pattern of readings.
type Cause int

// Causes. Their order settles equal weights: what costs least to look at comes first.
const (
	TemperatureOnly Cause = iota
	HotReading
	TemperatureSlip
	PressureUnitSlip
	WrongUnit
	FluidNotRelieved
	AmbientShift
	GaugeOff
	GaugeStuck
	GaugeDrifts
	AllowedLoss
	LeakOutside
	LeakIntoFluid
	FluidOnGasSide
	OverCharge
	causeCount
)

var causeWords = [causeCount]string{
	TemperatureOnly:  "temperature only, no gas lost",
	HotReading:       "read hot after the charge, since cooled",
	TemperatureSlip:  "temperature entered wrongly",
	PressureUnitSlip: "pressure entered in the wrong unit",
	WrongUnit:        "wrong unit read",
	FluidNotRelieved: "fluid side not relieved",
	AmbientShift:     "change of altitude or ambient pressure",
	GaugeOff:         "gauge off, zero or range",
	GaugeStuck:       "gauge stuck",
	GaugeDrifts:      "gauge drifting",
	AllowedLoss:      "loss within what the sheet allows",
	LeakOutside:      "gas leaks outside",
	LeakIntoFluid:    "gas leaks into the fluid",
	FluidOnGasSide:   "fluid on the gas side, separator failed",
	OverCharge:       "charged too high",
}

func (c Cause) String() string {
	if c < 0 || c >= causeCount {
		return fmt.Sprintf("Cause(%d)", int(c))
	}
	return causeWords[c]
}

// Fault tells whether the cause is a fault of unit, gauge or entry. The others explain what was seen, and nothing is wrong.
func (c Cause) Fault() bool {
	switch c {
	case TemperatureOnly, HotReading, AmbientShift, AllowedLoss:
		return false
	}
	return true
}

// clue is a fact and what it weighs for a cause; against it when negative. As a guide: 1 is a hint, 2 makes it likely, 3 and
// more settles it unless something speaks against it.
type clue struct {
	fact   fact
	weight float64
}

// rule is one row of the table: a cause, how it stands before anything is known, and the facts that weigh on it.
type rule struct {
	cause  Cause
	before float64
	clues  []clue
}

// rules is the table. A fact that is not listed for a cause says nothing about it.
//
// Sources of the patterns: NAVEDTRA 14018 (leak, oil at the valve, sudden drop when bled); the gas law, for what follows
// temperature, and plain logic for gauges, entries and units; the rest and all weights are common practice, no source.
var rules = []rule{
	{TemperatureOnly, 0, []clue{
		{dialFollowsTemperature, 3}, {falls, -2.5}, {rises, -2.5}, {odd, -2}, {temperatureSlips, -1},
	}},
	{HotReading, 0, []clue{
		{fellAtOnce, 2}, {leftWarm, 1.5}, {warmthExplains, 1}, {leftSettled, -2}, {fallsSinceFirstCheck, -2.5}, {said(BubblesAtValve), -1.5},
	}},
	{TemperatureSlip, -0.5, []clue{
		{temperatureSlips, 3.5}, {laterBack, 1}, {inLine, -3},
	}},
	{PressureUnitSlip, -0.5, []clue{
		{pressureUnitSlips, 4.5}, {laterBack, 1}, {inLine, -3},
	}},
	{WrongUnit, -0.5, []clue{
		{swapped, 4.5}, {fitsAnother, 2.5}, {laterBack, 0.7}, {inLine, -3},
	}},
	{FluidNotRelieved, 0, []clue{
		{fluidSeen, 3}, {reliefNotSaid, 1}, {atSystem, 3}, {rises, 2}, {said(NoSuddenDrop), 0.7}, {reliefSeen, -1},
		{said(SuddenDrop), -1}, {said(OilAtGasValve), -1.5}, {sameGaugeOff, -1.5},
	}},
	{AmbientShift, -0.5, []clue{
		{ambientExplains, 3}, {ambientNotMeasured, 1}, {allShift, 2}, {tooMuchForAmbient, -4}, {inLine, -2},
	}},
	{GaugeOff, 0, []clue{
		{gaugeStep, 2.5}, {sameGaugeOff, 2.5}, {said(GaugeNotAtZero), 3}, {said(GaugeAtZero), -1}, {said(GaugesAgree), -3},
		{sameGaugeInLine, -2}, {allShift, -1}, {inLine, -1.5},
	}},
	{GaugeStuck, -0.5, []clue{
		{dialStands, 3.5}, {said(NeedleSticks), 2.5}, {dialFollowsTemperature, -3}, {said(GaugesAgree), -3}, {sameGaugeInLine, -1},
	}},
	{GaugeDrifts, -0.5, []clue{
		{othersDriftToo, 3.5}, {falls, 0.7}, {rises, 0.7}, {said(GaugeNotAtZero), 1.5}, {said(GaugesAgree), -3}, {sameGaugeSteady, -2.5},
		{flat, -2}, {said(BubblesAtValve), -1},
	}},
	{AllowedLoss, 0, []clue{
		{withinAllowed, 3}, {said(BubblesAtValve), -2.5}, {said(FoamInReservoir), -1}, {said(OilAtGasValve), -2},
	}},
	{LeakOutside, 0, []clue{
		{falls, 2}, {lowReading, 0.7}, {lowWithSoundGauge, 1}, {said(BubblesAtValve), 3}, {chargeGone, 0.5}, {said(NoBubbles), -2}, {said(FoamInReservoir), -1}, {flat, -3}, {rises, -2},
		{othersDriftToo, -2}, {withinAllowed, -1.5}, {fellAtOnce, -1.5}, {temperatureSlips, -2}, {pressureUnitSlips, -2}, {swapped, -2}, {fitsAnother, -1}, {gaugeStep, -1.5},
	}},
	{LeakIntoFluid, -0.5, []clue{
		{falls, 2}, {lowReading, 0.7}, {lowWithSoundGauge, 1}, {said(FoamInReservoir), 2}, {said(ReservoirLevelFalls), 1.5}, {said(SpongyControls), 1}, {said(NoBubbles), 1}, {chargeGone, 0.5},
		{said(BubblesAtValve), -2}, {flat, -3}, {rises, -2}, {othersDriftToo, -2}, {withinAllowed, -1.5}, {fellAtOnce, -1.5},
		{temperatureSlips, -2}, {pressureUnitSlips, -2}, {swapped, -2}, {fitsAnother, -1}, {gaugeStep, -1.5},
	}},
	{FluidOnGasSide, -1, []clue{
		{said(OilAtGasValve), 4.5}, {atSystem, 1.5}, {reliefSeenAtSystem, 1}, {said(NoSuddenDrop), 1.5}, {said(FewStrokes), 0.7}, {rises, 0.7},
		{said(DryGasAtValve), -4}, {said(SuddenDrop), -2}, {fluidSeen, -1.5},
	}},
	{OverCharge, 0, []clue{
		{leftAbove, 2.5}, {foundAbove, 1.5}, {inLimits, -3}, {fellAtOnce, -1.5}, {fluidSeen, -1.5}, {atSystem, -2}, {pressureUnitSlips, -2},
		{temperatureSlips, -2}, {swapped, -2}, {rises, -1},
	}},
}

// tests tell a cause from having found nothing.
var tests = [causeCount]string{
	TemperatureOnly:  "read again with a probe on the shell after a soak: the corrected pressure should not have moved",
	HotReading:       "let it soak an hour or more and read twice, 20 minutes apart: it should stand still and be no lower than the last check",
	TemperatureSlip:  "measure the shell with a probe, note the unit, and correct the entry if the other unit was meant",
	PressureUnitSlip: "read the dial again and its unit, and correct the entry",
	WrongUnit:        "read both units again, serial plate in view, and correct the entries",
	FluidNotRelieved: "work every circuit of this unit until the fluid gauge shows zero, wait, and read again",
	AmbientShift:     "note the station pressure, not reduced to sea level, and correct the reading with it",
	GaugeOff:         "vent the gauge and look at its zero, then read one unit with it and with a calibrated gauge",
	GaugeStuck:       "vent and reconnect the gauge, tap it, and see whether the needle moves; read with another gauge",
	GaugeDrifts:      "read two units with this gauge and with a calibrated one, the same hour",
	AllowedLoss:      "keep reading with the same gauge; act when the rate passes the allowed one",
	LeakOutside:      "soap test of valve core, swivel, boss seal and gauge line, fluid side relieved",
	LeakIntoFluid:    "bleed the fluid side for gas and watch the reservoir for foam; soap test first",
	FluidOnGasSide:   "with the fluid side relieved and locked out, crack the gas valve by the manual: oil means a failed separator",
	OverCharge:       "read again after a soak with the fluid side relieved; bleed to target by the manual if it stays high",
}

// between holds tests that tell two look-alikes apart better than the test of either alone.
var between = map[[2]Cause]string{
	{LeakOutside, LeakIntoFluid}:       "soap test of valve core, swivel, boss seal and gauge line: bubbles say outside; none, and gas bled from the fluid side, say inside",
	{FluidNotRelieved, FluidOnGasSide}: "relieve again, every circuit, and bleed down slowly: a sudden drop says fluid was trapped; none, and oil at the cracked gas valve, say a failed separator",
	{HotReading, LeakOutside}:          "read again a day from now with the same gauge: standing still says it was read hot, a further fall says leak",
	{AllowedLoss, LeakOutside}:         "soap test: no bubble is allowed, whatever the rate; then go on reading with the same gauge",
	{GaugeOff, LeakOutside}:            "read this unit with the earlier gauge and with this one, the same hour",
	{GaugeDrifts, LeakOutside}:         "read this unit and another with a second gauge, the same hour: one gauge low on both says gauge, one unit low on both says leak",
	{GaugeOff, GaugeDrifts}:            "compare the gauge with a calibrated one now and again in a week: a steady difference says off, a growing one says drift",
	{GaugeOff, AmbientShift}:           "read one unit with a second gauge at this field: a difference says gauge, none says ambient pressure",
	{GaugeStuck, LeakOutside}:          "tap the gauge and read with another one",
	{TemperatureSlip, LeakOutside}:     "read again now with a probe, and note the unit: on the old trend says slip, low again says leak",
	{PressureUnitSlip, LeakOutside}:    "read the dial again and its unit: on the old trend says slip, low again says the charge is gone",
	{WrongUnit, LeakOutside}:           "read both units again, serial plate in view: back on their trends says they were mixed up, low again says leak",
	{WrongUnit, TemperatureSlip}:       "read both units again with a probe, serial plate in view",
	{OverCharge, HotReading}:           "let it soak and read again: still above the limit says charged too high",
	{OverCharge, FluidNotRelieved}:     "relieve again, every circuit, then read: still above the limit says charged too high",
	{TemperatureOnly, LeakOutside}:     "read again at another temperature with a probe: the same corrected pressure says temperature only",
	{TemperatureSlip, TemperatureOnly}: "measure the shell with a probe and compare with the temperature in the entry",
	{AllowedLoss, LeakIntoFluid}:       "look for foam and bleed the fluid side for gas; then go on reading with the same gauge",
}

func testOf(c Cause) string { return tests[c] }

func testBetween(a, b Cause) string {
	if t, ok := between[[2]Cause{a, b}]; ok {
		return t
	}
	if t, ok := between[[2]Cause{b, a}]; ok {
		return t
	}
	return tests[a]
}
