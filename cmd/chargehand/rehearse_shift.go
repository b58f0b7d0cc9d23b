package main

import (
	_ "embed"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"time"
)

//go:embed rehearsal/HA-60.csv
var rehearsalChart []byte

// rightOnTheDial is the sheet's charge, and what the dial of an overcharged unit shows in the cold.
const rightOnTheDial = "1250psi"

// shift is the story. The field, people, aircraft, types and manuals are invented. A sentence states no computed figure of its
// own, find takes it from what the command printed; and what a sentence says came of a step is demanded of it.
func (r *rehearsal) shift() {
	asha, ben, cato := r.enter("laptop-1", "asha"), r.enter("laptop-2", "ben"), r.enter("laptop-2", "cato")
	r.say("A cold shift at Dry Creek. The field, its people, aircraft and manuals are invented; the commands are real, run just " +
		"now, and print what you see. Left out are --book, --passphrase-file and lines that tell nothing new: shift.log " +
		"has them. Keys open at once here; a real one takes about a second, so that guessing is slow.")
	r.outset(asha)
	r.joining(asha, ben, cato)
	r.readings(ben)
	r.charging(ben, cato)
	r.meeting(asha, ben, cato)
	r.proof(asha, ben, cato)
}

// daysOn is a date so many days from now.
func daysOn(days int) string { return time.Now().AddDate(0, 0, days).Format(time.DateOnly) }

func (r *rehearsal) outset(asha player) {
	r.head("Laptop one: Asha Brandt, lead, opens the book")
	r.run(asha, statusOK, "founding", "book", "start", "--title", "Dry Creek", "--name", "Asha Brandt")
	r.say("She enters the limits as the manuals give them: one type by a charge with its tolerance, one by a chart.")
	chart := filepath.Join(r.dir, "HA-60.csv")
	if r.err == nil {
		r.err = os.WriteFile(chart, rehearsalChart, 0o600)
	}
	r.run(asha, statusOK, "none", "sheet", "add", "--part", "HA-40", "--charge", rightOnTheDial, "--minus", "100psi", "--plus", "100psi", "--at", "70F",
		"--system-pressure", "3000psi", "--document", "CM-29", "--revision", "A", "--effective", daysOn(-400))
	r.run(asha, statusOK, "none", "sheet", "add", "--part", "HA-60", "--chart", chart, "--at", "70F", "--system-pressure", "3000psi",
		"--document", "CM-31", "--revision", "A", "--effective", daysOn(-400))
	for _, g := range [][]string{{"M-1", "2000psi", "ASME 3A", "5psi"}, {"G-7", "2500psi", "EN 1.6", "20psi"}, {"R-9", "5000psi", "EN 2.5", "100psi"}} {
		r.do(asha, statusOK, "gauge", "add", "--asset", g[0], "--span", g[1], "--accuracy", g[2], "--division", g[3], "--calibrated", daysOn(-90), "--due", daysOn(275))
	}
	for _, u := range [][]string{{"HA-40", "104", "KITE 2", "left brake"}, {"HA-40", "105", "KITE 2", "right brake"}, {"HA-60", "201", "KITE 2", "nose gear"},
		{"HA-40", "106", "KITE 5", "left brake"}, {"HA-60", "202", "KITE 5", "nose gear"}, {"HA-60", "203", "KITE 5", "cargo door"}} {
		r.do(asha, statusOK, "unit", "add", "--part", u[0], "--serial", u[1])
		r.do(asha, statusOK, "unit", "fit", u[0]+"/"+u[1], "--aircraft", u[2], "--position", u[3])
	}
	r.say("Likewise six units, where they are fitted, and three gauges: M-1, the master; G-7, on the nitrogen cart; R-9, off a " +
		"bottle regulator.")
}

func (r *rehearsal) joining(asha, ben, cato player) {
	r.head("Laptop two: Ben Osei, technician, and Cato Lund, inspector, join")
	admit := func(role string) []string {
		return []string{"hand", "admit", "--by-code", "--role", role, "--listen", "127.0.0.1:0", "--yes"}
	}
	join := func(name string) func(string) []string {
		return func(output string) []string {
			return []string{"book", "join", "--name", name, "--code", r.find(output, `^code +(\S+)`), "--to", r.find(output, `^in reach +at (\S+)`)}
		}
	}
	atHost, atGuest, line := r.pair(asha, admit("technician"), ben, join("Ben Osei"))
	r.say("Asha reads the code out across the ramp, and would compare the key words before her yes (--yes stands in for her). The " +
		"book travels over a socket, here this machine's own.")
	r.tell(asha, admit("technician"), atHost, "code", "asks", "key words")
	r.tell(ben, line, atGuest, "key words", "received")
	r.pair(asha, admit("inspector"), cato, join("Cato Lund"))
	r.meet(asha, ben)
	r.say("Cato joins likewise, in a folder of his own on Ben's laptop: a key is one person's. Ben meets Asha once more, to know him.")
}

// relieved adds how the fluid side was made ready.
func relieved(args ...string) []string {
	return append(args, "--relieved", "pedal, 12 strokes", "--fluid", "0psi")
}

func (r *rehearsal) readings(ben player) {
	r.head("On the line at dusk, laptop two alone: Ben reads")
	low := r.run(ben, statusOK, "verdict, corrected", relieved("check", "104", "--gauge", "M-1", "--pressure", "1045psi", "--temperature", "18F", "--from", "shell")...)
	r.find(low, `^verdict +(PASS)$`)
	r.say("The dial is below the sheet's lowest figure, and the charge is good: at the sheet's temperature the same gas shows %s. "+
		"Next, the very figure that the sheet asks for:", r.find(low, `^corrected +(\S+ psi)`))
	high := r.run(ben, statusNo, "verdict, corrected, next", relieved("check", "105", "--gauge", "M-1", "--pressure", rightOnTheDial, "--temperature", "18F", "--from", "shell")...)
	r.find(high, `^next +(bleed) `)
	r.say("Right on the dial, and overcharged: %s at the sheet's temperature. For the next unit the master gauge is not at hand:", r.find(high, `^corrected +(\S+ psi)`))
	coarse := r.run(ben, statusNo, "verdict, next", relieved("check", "106", "--gauge", "R-9", "--pressure", "950psi", "--temperature", "18F", "--from", "shell", "--unsigned")...)
	r.find(coarse, `^in words +.*(no reading of this gauge could pass)`)
	r.say("No reading of that gauge could pass, so nobody argues about one. The other type goes by its chart, for which the " +
		"cart's gauge will do. A slip of the finger is asked about before anything is signed:")
	chart := relieved("check", "201", "--gauge", "G-7", "--pressure", "1320psi", "--from", "shell")
	r.run(ben, statusUsage, "chargehand", slices.Concat(chart, []string{"--temperature", "91F"})...)
	r.find(r.do(ben, statusOK, slices.Concat(chart, []string{"--temperature", "19F"})...), `^verdict +(PASS)$`)
}

func (r *rehearsal) charging(ben, cato player) {
	r.say("Put right, that one passes. With M-1 back, 106 is low indeed. Ben charges it, lets it settle, and signs what he found and what he left.")
	charged := r.run(ben, statusOK, "as found, verdict, corrected, signed", relieved("charge", "106", "--gauge", "M-1", "--found", "930psi", "--found-temperature", "18F", "--found-from", "shell",
		"--left", "1132psi", "--left-temperature", "24F", "--left-from", "shell", "--left-soak", "30m", "--bottle", "N2-3")...)
	r.find(charged, `^as found +(fail): `)
	r.meet(ben, cato)
	r.say("Cato watched it done. His book meets Ben's, and he puts his own name to that entry and no other.")
	r.run(cato, statusOK, "signed", "countersign", r.find(charged, `^signed +entry ([0-9a-f]+)`), "--meaning", "inspected")
	r.meet(ben, cato)
}

// meet brings two books together.
func (r *rehearsal) meet(host, guest player) (atHost, atGuest string, guestLine []string) {
	return r.pair(host, []string{"meet", "--once", "--listen", "127.0.0.1:0"}, guest, func(output string) []string {
		return []string{"meet", "--to", r.find(output, `^in reach +at (\S+)`)}
	})
}

func (r *rehearsal) meeting(asha, ben, cato player) {
	r.head("In the shelter meanwhile, laptop one alone; then they meet")
	r.do(asha, statusOK, relieved("check", "202", "--gauge", "G-7", "--pressure", "1325psi", "--temperature", "21F", "--from", "shell")...)
	r.say("Asha reads one unit herself. The courier brings revision B of CM-29, in force since yesterday; she enters it. She has " +
		"not seen Ben's work, nor he the revision, when he comes back into reach.")
	r.run(asha, statusOK, "signed", "sheet", "add", "--part", "HA-40", "--charge", "1300psi", "--minus", "75psi", "--plus", "75psi", "--at", "70F",
		"--system-pressure", "3000psi", "--document", "CM-29", "--revision", "B", "--effective", daysOn(-1))
	atHost, atGuest, line := r.meet(asha, ben)
	const moved = `^moved +(HA-40/104), entry [0-9a-f]+: pass, now fail, because of CM-29 rev B`
	r.find(atHost, moved)
	r.find(atGuest, moved)
	r.tell(ben, line, atGuest, "received", "sent", "moved       HA-40/104", "fingerprint")
	r.say("Unit 104 passed by the page Ben knew and fails by the one in force. Nobody touched his entry: the revision moved the " +
		"verdict, on both laptops, and both name it. Unit 106, as Ben left it, passes by either. Cato hears it from Ben's book.")
	r.meet(ben, cato)
	board := r.run(asha, statusOK, "VERDICT, fail, not read, pass", "board")
	r.find(board, `^pass +(HA-40/106) `)
}

func (r *rehearsal) proof(asha, ben, cato player) {
	r.head("Proof")
	const fingerprint = `^fingerprint +([0-9a-f ]+[0-9a-f])`
	lead := r.find(r.do(asha, statusOK, "book", "show"), fingerprint)
	if tech := r.find(r.do(ben, statusOK, "book", "show"), fingerprint); tech != lead && r.err == nil {
		r.err = couldNot(fmt.Errorf("after the meetings Asha's fingerprint is %s and Ben's is %s", lead, tech), "Report this; the books are in "+r.dir)
	}
	r.say("Asha reads out the fingerprint that her book shows, and Ben's is the same. Cato holds his copy against it; that takes no key, and no trust in any laptop.")
	r.run(cato, statusOK, "fingerprint, checked, - entry, found  ", "audit", "--fingerprint", lead)
	r.head("Go on from here")
	r.say("The books stay in %s, each with its passphrase beside it. After 'go build ./cmd/chargehand', for instance:", r.dir)
	for _, args := range [][]string{{"board"}, {"unit", "show", "HA-40/104"}, {"check", "HA-60/203"}} {
		r.printf("%s\n", asTyped("./", slices.Concat(args, ben.own(args))))
	}
}
