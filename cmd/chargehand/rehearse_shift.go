package main

import (
	"fmt"
	"time"
)

// shift is the story. The field, the people, the aircraft and the types are invented. It states no computed figure of its own:
// each comes from a command, and each outcome that a sentence speaks of is one that the step below it demands.
func (r *rehearsal) shift() {
	now := time.Now()
	calibrated, due, month := now.AddDate(0, -3, 0).Format(time.DateOnly), now.AddDate(0, 9, 0).Format(time.DateOnly), now.AddDate(0, -1, 0).Format(time.DateOnly)
	const relieved = `--relieved "brake pedal, 12 strokes" --fluid 0psi`
	verdict := []string{"verdict", "corrected", "next", "signed"}

	r.say("Dry Creek is an invented field: two aircraft, KITE 2 and KITE 5, no internet, a cold evening. Asha Brandt leads the detachment. " +
		"On her laptop she starts the book and enters what the manuals approve: one type has a charge with a tolerance, the other a chart.")
	r.do(step{laptop: "lead", line: `book start --title "Dry Creek" --name "Asha Brandt"`, expect: "holds +1 entries"})
	r.do(step{laptop: "lead", line: `sheet add --part HA-40 --charge 1250psi --minus 100psi --plus 100psi --at 70F --system-pressure 3000psi --document CM-29 --revision A --effective ` + month, expect: "signed"})
	r.do(step{laptop: "lead", line: `sheet add --part HA-60 --chart HA-60-rev-A.csv --at 70F --system-pressure 3000psi --document CM-31 --revision A --effective ` + month, expect: "signed"})

	r.say("Then the gauges, each with its class and calibration, and six units where they are fitted.")
	gauge := func(asset, span, accuracy, division string) string {
		return fmt.Sprintf(`gauge add --asset %s --span %s --accuracy "%s" --division %s --calibrated %s --due %s`, asset, span, accuracy, division, calibrated, due)
	}
	r.do(step{laptop: "lead", line: gauge("G-7", "2000psi", "ASME 2A", "10psi"), expect: "signed"})
	r.do(step{laptop: "lead", line: gauge("G-8", "1000psi", "ASME 2A", "5psi"), expect: "signed", quiet: true})
	r.do(step{laptop: "lead", line: gauge("G-9", "5000psi", "ASME B", "100psi"), expect: "signed", quiet: true})
	for _, u := range []struct{ part, serial, aircraft, position string }{
		{"HA-40", "104", "KITE 2", "left brake"}, {"HA-40", "105", "KITE 2", "right brake"}, {"HA-60", "31", "KITE 2", "gear"},
		{"HA-40", "118", "KITE 5", "left brake"}, {"HA-40", "121", "KITE 5", "right brake"}, {"HA-60", "33", "KITE 5", "gear"},
	} {
		r.do(step{laptop: "lead", line: fmt.Sprintf("unit add --part %s --serial %s", u.part, u.serial), expect: "signed", quiet: true})
		r.do(step{laptop: "lead", line: fmt.Sprintf(`unit fit %s/%s --aircraft "%s" --position "%s"`, u.part, u.serial, u.aircraft, u.position), expect: "signed", quiet: true})
	}
	r.do(step{laptop: "lead", line: "gauge list", expect: "G-9"})

	r.say("Ben Osei, technician, has the other laptop. Asha reads a one-time code out; both compare the key words before she says yes. " +
		"Cato Lund, inspector, joins the same way with a key in a folder of his own: a signature is one person's, whoever owns the laptop.")
	admit := func(role string) step {
		return step{laptop: "lead", line: "hand admit --by-code --yes --role " + role, expect: "signed", show: []string{"code", "asks", "key words", "signed"}}
	}
	r.together(admit("technician"), step{laptop: "tech", line: `book join --code @CODE --name "Ben Osei" --to @ADDRESS`, expect: "the other laptop's is the same", show: []string{"key words", "received", "fingerprint"}})
	quietly := admit("inspector")
	quietly.quiet = true
	r.together(quietly, step{laptop: "inspector", line: `book join --code @CODE --name "Cato Lund" --to @ADDRESS`, expect: "the other laptop's is the same", quiet: true})

	r.say("Ben walks out to KITE 2, out of reach of everybody. The left brake's dial looks low against the sheet. It is the cold: at the sheet's temperature the charge is in limits.")
	r.do(step{laptop: "tech", line: `check 104 --gauge G-7 --pressure 1060psi --temperature 14F --from shell ` + relieved, expect: "verdict +PASS"})
	r.say("The gauge from the cart is too coarse for the gear unit's chart; the tool says so before anything is signed, and which gauge would do.")
	r.do(step{laptop: "tech", line: `check 31 --gauge G-9 --pressure 580psi --temperature 14F --from shell --unsigned ` + relieved, status: statusNo, expect: "NOT MEASURABLE", show: []string{"verdict", "next"}})
	r.do(step{laptop: "tech", line: `check 31 --gauge G-8 --pressure 580psi --temperature 14F --from shell ` + relieved, expect: "verdict +PASS", name: "gear", show: verdict})
	r.do(step{laptop: "tech", line: `check 105 --gauge G-7 --pressure 1085psi --temperature 14F --from shell ` + relieved, expect: "verdict +PASS", quiet: true})

	r.say("KITE 5 stands under the hangar heater. The right brake's dial looks well within the sheet's figures, and is not: the gas is warm. " +
		"The tool first doubts the temperature, so far from the last one, and wants a reason.")
	warm := `check 121 --gauge G-7 --pressure 1165psi --temperature 95F --from shell ` + relieved
	r.do(step{laptop: "tech", line: warm, status: statusUsage, expect: "far from the 14 F"})
	r.do(step{laptop: "tech", line: warm + ` --unlikely-because "under the hangar heater"`, status: statusNo, expect: "verdict +(CONDITIONAL )?FAIL"})
	r.say("Ben charges it from bottle N2-3, lets it settle, and signs what he found and what he left.")
	r.do(step{laptop: "tech", line: `charge 121 --gauge G-7 --found 1165psi --found-temperature 95F --found-from shell --left 1325psi --left-temperature 96F --left-from shell --left-soak 40m --bottle N2-3 ` + relieved,
		expect: "verdict +PASS", name: "charge", show: []string{"as found", "as left", "verdict", "corrected", "signed"}})
	r.do(step{laptop: "tech", line: `check 33 --gauge G-8 --pressure 690psi --temperature 95F --from shell ` + relieved, expect: "verdict +PASS", quiet: true})

	r.say("Meanwhile, in the shelter, a revised manual page has come by courier. Asha enters it; it is in force at once. Ben knows nothing of it yet.")
	r.do(step{laptop: "lead", line: `sheet add --part HA-60 --chart HA-60-rev-B.csv --at 70F --system-pressure 3000psi --document CM-31 --revision B --effective ` + now.AddDate(0, 0, -1).Format(time.DateOnly), expect: "signed"})
	r.do(step{laptop: "lead", line: `check 118 --gauge G-7 --pressure 1100psi --temperature 14F --from shell ` + relieved, expect: "verdict +PASS", show: []string{"verdict", "corrected", "signed"}})

	r.say("Ben comes back into reach and they meet. Each laptop takes what it lacks, verifies every signature and computes every verdict anew: " +
		"what Ben signed as a pass under the old page is told on both sides, with the entry that moved it.")
	r.together(step{laptop: "lead", line: "meet --once", expect: "moved +HA-60/31", quiet: true}, step{laptop: "tech", line: "meet --to @ADDRESS", expect: `moved +HA-60/31, entry [0-9a-f]+: pass, now .*because of CM-31 rev B`})
	r.together(step{laptop: "lead", line: "meet --once", expect: "met", quiet: true}, step{laptop: "inspector", line: "meet --to @ADDRESS", expect: "the other laptop's is the same", show: []string{"met", "received", "fingerprint"}})

	r.say("Cato has looked at the work on the right brake of KITE 5. His signature is bound to exactly what Ben signed; had Ben asked himself, the tool would have refused.")
	r.do(step{laptop: "inspector", line: "countersign @charge --meaning inspected", expect: "signed"})
	r.do(step{laptop: "tech", line: "countersign @charge --meaning inspected", status: statusNot, expect: "must be signed by"})
	r.together(step{laptop: "lead", line: "meet --once", expect: "met", quiet: true}, step{laptop: "inspector", line: "meet --to @ADDRESS", expect: "the other laptop's is the same", quiet: true})

	r.say("End of the shift. The board puts the most urgent first; the audit verifies the whole book, and needs no key and no trust in any laptop.")
	r.do(step{laptop: "lead", line: "board", expect: "HA-60/31"})
	r.do(step{laptop: "lead", line: "audit", expect: "checked"})

	r.say(fmt.Sprintf("The books are yours to go on with; %q opens every key. (A real key takes about a second to open, so that guessing is slow; these do not.)", rehearsalPassphrase))
	if r.err == nil {
		fmt.Fprintf(r.w, "\n  cd %s     # with chargehand built: go build -o chargehand ./cmd/chargehand\n", r.dir)
		fmt.Fprint(r.w, "  chargehand unit show HA-60/31 --book lead\n  chargehand check 33 --book tech      # asks for what it needs\n  chargehand meet --book lead          # and in another window: chargehand meet --book tech\n")
	}
}
