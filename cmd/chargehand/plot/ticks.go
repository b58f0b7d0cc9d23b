package plot

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"
)

type interval struct{ low, high float64 }

func newRange() interval { return interval{math.Inf(1), math.Inf(-1)} }

func (r *interval) add(v float64) {
	if !math.IsNaN(v) && !math.IsInf(v, 0) {
		r.low, r.high = min(r.low, v), max(r.high, v)
	}
}

// padded returns the range with a part of its width added at both ends; one with no width gets some.
func (r interval) padded(part float64) (low, high float64) {
	if r.low > r.high {
		return 0, 1
	}
	w := r.high - r.low
	if w <= 1e-9*max(math.Abs(r.low), math.Abs(r.high)) {
		w = max(math.Abs(r.low)*0.02, 1e-6)
		part = max(part, 0.5)
	}
	return r.low - part*w, r.high + part*w
}

// roundTicks returns about n ticks at multiples of 1, 2 or 5 times a power of ten.
func roundTicks(low, high float64, n int) []tick {
	if !(high > low) {
		return nil
	}
	raw := (high - low) / float64(n)
	power := math.Pow(10, math.Floor(math.Log10(raw)))
	step := 10 * power
	for _, m := range []float64{1, 2, 5} {
		if m*power >= raw*0.7 {
			step = m * power
			break
		}
	}
	places := 0
	for places < 9 && math.Abs(step*math.Pow10(places)-math.Round(step*math.Pow10(places))) > 1e-6 {
		places++
	}
	var out []tick
	for k := math.Ceil(low/step - 1e-9); k*step <= high+1e-9*step && len(out) < 4*n; k++ {
		out = append(out, tick{k * step, number(k*step, places)})
	}
	return out
}

// number writes a value with a comma between thousands.
func number(v float64, places int) string {
	s := strconv.FormatFloat(math.Round(v*math.Pow10(places))/math.Pow10(places)+0, 'f', places, 64)
	sign := ""
	if s[0] == '-' {
		sign, s = "-", s[1:]
	}
	whole, fraction, _ := strings.Cut(s, ".")
	for i := len(whole) - 3; i > 0; i -= 3 {
		whole = whole[:i] + "," + whole[i:]
	}
	if fraction != "" {
		whole += "." + fraction
	}
	return sign + whole
}

// figures returns the places that show a value of this size to about three digits or to the unit.
func figures(v float64) int {
	switch v = math.Abs(v); {
	case v >= 100 || v == 0:
		return 0
	case v >= 10:
		return 1
	case v >= 1:
		return 2
	}
	return 3
}

const dayHours = 24

// steps of time, hours; months are handled apart.
var hourSteps = []float64{1. / 60, 2. / 60, 5. / 60, 10. / 60, 0.25, 0.5, 1, 2, 3, 6, 12, dayHours, 2 * dayHours, 4 * dayHours, 7 * dayHours, 14 * dayHours}

var monthSteps = []int{1, 2, 3, 6, 12, 24, 60, 120}

var monthNames = [...]string{"", "Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"}

// timeTicks returns ticks at round times of the zone, for a range in Unix seconds, and the words for the axis.
func timeTicks(low, high float64, n int, zone *time.Location) (ticks []tick, title string) {
	from, to := time.Unix(int64(low), 0).In(zone), time.Unix(int64(high), 0).In(zone)
	hours := (high - low) / 3600
	years := strconv.Itoa(from.Year())
	if to.Year() != from.Year() {
		years += " to " + strconv.Itoa(to.Year())
	}
	where := "UTC"
	if _, offset := from.Zone(); offset != 0 {
		where += from.Format("-07:00")
	}
	for _, step := range hourSteps {
		if hours/step > float64(n) {
			continue
		}
		day := time.Date(from.Year(), from.Month(), from.Day(), 0, 0, 0, 0, zone)
		if step > dayHours { // weeks and pairs of days count from a fixed day, so that a longer history keeps its ticks
			whole := int(math.Floor(day.Sub(time.Date(2024, 1, 1, 0, 0, 0, 0, zone)).Hours()/dayHours + 0.5))
			day = day.AddDate(0, 0, -(whole % int(step/dayHours)))
		}
		for i := 0; i < 10000; i++ {
			var at time.Time
			if step >= dayHours {
				at = day.AddDate(0, 0, i*int(step/dayHours))
			} else {
				at = day.Add(time.Duration(math.Round(float64(i)*step*3600)) * time.Second)
			}
			v := float64(at.Unix())
			if v > high {
				break
			}
			if v < low {
				continue
			}
			label := at.Format("15:04")
			if step >= dayHours || at.Hour() == 0 && at.Minute() == 0 {
				label = fmt.Sprintf("%d %s", at.Day(), monthNames[at.Month()])
			}
			ticks = append(ticks, tick{v, label})
		}
		if step < dayHours && from.YearDay() == to.YearDay() {
			return ticks, fmt.Sprintf("time on %s, %s", from.Format("2006-01-02"), where)
		}
		if step < dayHours {
			return ticks, fmt.Sprintf("time, from %s, %s", from.Format("2006-01-02"), where)
		}
		return ticks, fmt.Sprintf("date, %s, %s", years, where)
	}
	months := hours / dayHours / 30.4
	step := monthSteps[len(monthSteps)-1]
	for _, s := range monthSteps {
		if months/float64(s) <= float64(n) {
			step = s
			break
		}
	}
	first := (from.Year()*12 + int(from.Month()) - 1) / step * step
	for k := first; len(ticks) < 4*n; k += step {
		at := time.Date(k/12, time.Month(k%12+1), 1, 0, 0, 0, 0, zone)
		v := float64(at.Unix())
		if v > high {
			break
		}
		if v < low {
			continue
		}
		label := monthNames[at.Month()]
		if at.Month() == time.January || len(ticks) == 0 || step >= 12 {
			label += fmt.Sprintf(" %d", at.Year())
		}
		ticks = append(ticks, tick{v, label})
	}
	return ticks, fmt.Sprintf("date, %s, %s", years, where)
}
