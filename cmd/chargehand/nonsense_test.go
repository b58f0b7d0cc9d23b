package main

import (
	"bytes"
	"context"
	"crypto/sha256"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// goish is what a person should never read: names of Go's functions, its panics, its types.
var goish = regexp.MustCompile(`strconv\.|panic|goroutine|runtime error|\bnil\b|%!|0x[0-9a-f]{6}|\*\w+\.\w+|json:|invalid syntax`)

// bookState is what must not change: every file of the book's folder but the store's, and every entry in the store. The files of
// the store are left out: opening it, Badger puts new empty value logs (*.vlog) in place of the old, and may join tables.
func bookState(t *testing.T, dir string) string {
	t.Helper()
	h := sha256.New()
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() {
			if d.Name() == "store" {
				return fs.SkipDir
			}
			return nil
		}
		data, err := os.ReadFile(path)
		fmt.Fprintf(h, "%q %x\n", path, sha256.Sum256(data))
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	id, err := os.ReadFile(filepath.Join(dir, "book"))
	if err != nil {
		t.Fatal(err)
	}
	book, err := record.ParseBookID(strings.TrimSpace(string(id)))
	if err != nil {
		t.Fatal(err)
	}
	m, err := ledger.Inspect(filepath.Join(dir, "store"), book, func(where string, err error) { t.Errorf("%s: %v", where, err) })
	if err != nil {
		t.Fatal(err)
	}
	for _, it := range m.Entries {
		fmt.Fprintf(h, "%x\n", sha256.Sum256(it.Raw()))
	}
	return fmt.Sprintf("%d entries, %x", len(m.Entries), h.Sum(nil))
}

// command runs one in the process of the test.
func command(t *testing.T, args ...string) (status int, out, errs string) {
	t.Helper()
	var o, e bytes.Buffer
	status = run(context.WithValue(t.Context(), workFactorKey{}, rehearsalWorkFactor), args, streams{strings.NewReader(""), &o, &e})
	return status, o.String(), e.String()
}

// Wrong input to the commands that work on a book: each gives status 2 or 3 and one line that quotes the value and says what to
// do, and changes nothing in the book.
func TestNonsenseChangesNothing(t *testing.T) {
	work := t.TempDir()
	t.Chdir(work)
	t.Setenv("CHARGEHAND_BOOK", "b")
	write := func(name, text string) {
		if err := os.WriteFile(name, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	write("pp", "cold nitrogen night\n")
	write("wrong", "warm nitrogen night\n")
	write("short", "cold\n")
	write("nothing", "")
	write("chart-few.csv", "temperature,low,charge,high\n70F,950psi,1000psi,1050psi\n")
	write("chart-columns.csv", "temperature,low,charge\n70F,950psi,1000psi\n80F,960psi,1010psi\n")
	write("chart-unit.csv", "temperature,low,charge,high\n70F,950psi,1000psi,1050psi\n80F,960,1010psi,1060psi\n")
	write("chart-order.csv", "temperature,low,charge,high\n70F,1050psi,1000psi,950psi\n80F,960psi,1010psi,1060psi\n")
	write("chart-twice.csv", "temperature,low,charge,high\n70F,950psi,1000psi,1050psi\n70F,960psi,1010psi,1060psi\n")
	prepare := func(args ...string) {
		t.Helper()
		if status, _, errs := command(t, append(args, "--passphrase-file", "pp")...); status != statusOK {
			t.Fatalf("%q: %d, %s", args, status, errs)
		}
	}
	prepare("book", "start", "--title", "Dry Creek", "--name", "Asha Brandt")
	prepare("unit", "add", "--part", "HA-40", "--serial", "104")
	prepare("unit", "add", "--part", "HA-60", "--serial", "104")
	prepare("gauge", "add", "--asset", "G-7", "--span", "3000psi", "--accuracy", "ASME 1A", "--division", "10psi", "--calibrated", "2020-01-10", "--due", "2120-01-10")
	prepare("sheet", "add", "--part", "HA-40", "--charge", "1250psi", "--minus", "100psi", "--plus", "100psi", "--at", "70F", "--document", "CM-29", "--revision", "A", "--effective", "2020-01-01")
	prepare("check", "HA-40/104", "--gauge", "G-7", "--pressure", "1180psi", "--temperature", "41F", "--from", "shell", "--relieved", "pedal", "--fluid", "0psi")

	const good = "check HA-40/104 --gauge G-7 --pressure 1180psi --temperature 41F --from shell --relieved pedal --fluid 0psi"
	check := func(old, new string) string {
		if !strings.Contains(good, old) {
			t.Fatalf("%q is not in the command", old)
		}
		return strings.Replace(good, old, new, 1)
	}
	const gauge = "gauge add --asset G-8 --span 3000psi --accuracy EN_1.6 --division 10psi --calibrated 2020-01-10 --due 2120-01-10"
	gaugeWith := func(old, new string) string { return strings.Replace(gauge, old, new, 1) }
	const sheet = "sheet add --part HA-60 --charge 1000psi --minus 50psi --plus 50psi --at 70F --document CM-31 --revision A"
	sheetWith := func(old, new string) string { return strings.Replace(sheet, old, new, 1) }
	const noKey = "0000000000000000000000000000000000000000000000000000000000000000"

	for _, test := range []struct {
		line         string // an underscore stands for a space inside one argument, "" for an empty one
		status       int
		quoted, todo string
	}{
		// Numbers, units, ranges of a reading.
		{check("1180psi", "psi"), 2, `--pressure: "psi"`, "1180psi"},
		{check("1180psi", "11,80psi"), 2, `"11,80psi" has a comma`, "point"},
		{check("1180psi", "1180,5psi"), 2, `"1180,5psi" has a comma`, "point"},
		{check("1180psi", "1.180.5psi"), 2, `"1.180.5psi"`, "1180psi"},
		{check("1180psi", "1e3psi"), 2, `"1e3psi"`, "1180psi"},
		{check("1180psi", "NaNpsi"), 2, `"NaNpsi"`, "1180psi"},
		{check("1180psi", "0x10psi"), 2, `"0x10psi"`, "1180psi"},
		{check("1180psi", "1180pounds"), 2, `"1180pounds"`, "1180psi"},
		{check("1180psi", "1180C"), 2, `"1180C" is not a pressure`, "psi, bar"},
		{check("1180psi", "12345678901234567890psi"), 2, `"12345678901234567890psi" has more digits`, "1180psi"},
		{check("41F", "900F"), 2, `--temperature: "900F"`, "inside that range"},
		{check("41F", "-200F"), 2, `--temperature: "-200F"`, "inside that range"},
		{check("41F", "-300C"), 2, `"-300C" is below absolute zero`, "41F"},
		{check("41F", "41psi"), 2, `"41psi" is not a temperature`, "F, C, K"},
		{check("--fluid 0psi", "--fluid none"), 2, `--fluid: "none"`, "1180psi"},
		{good + " --ambient 0psi", 2, `--ambient: "0psi"`, "above zero"},
		{good + " --ambient 1013hPa --elevation 500ft", 2, `--ambient "1013 hPa" and --elevation "500 ft"`, "Give the one"},
		{good + " --elevation 90000ft", 2, `--elevation: "90000ft"`, "inside that range"},
		{good + " --soak 20", 2, `--soak: "20"`, "45m"},
		{good + " --soak -20m", 2, `--soak: "-20m"`, "45m"},
		{good + " --done yesterday", 2, `--done: "yesterday" is not a time`, "2031-03-04"},
		{good + " --done 2031-13-04", 2, `--done: "2031-13-04"`, "2031-03-04"},
		{good + " --done 1931-03-04", 2, `--done: "1931-03-04" is before 1970`, "year"},
		{check("shell", "thumb"), 2, `"thumb"`, "shell, ambient or unknown"},
		{check("G-7", "G-99"), 2, `no gauge "G-99"`, "gauge add"},
		{check("HA-40/104", "HA-40/105"), 2, `no unit "HA-40/105"`, "unit add"},
		{check("HA-40/104", "104"), 2, `2 units have the serial "104"`, "HA-40/104"},
		{check("HA-40/104", "104 HA-40/104"), 2, "received 2", "--help"},
		{check("1180psi", "118psi"), 2, "corrected pressure of 126 psi", "--unlikely-because"},
		{check("1180psi", "5000psi"), 2, `"5000 psi" is above the span of gauge G-7, "3000 psi"`, "gauge"},
		{check("1180psi", "-5psi"), 2, `--pressure: "-5 psi" is below zero`, "0psi"},
		{check(" --relieved pedal", ""), 2, "--relieved is missing", "Give it"},
		{check("pedal", "ped\x01al"), 2, `control character U+0001`, "written"},
		{check("pedal", strings.Repeat("p", 2001)), 2, "2001 bytes long", "written"},

		// Gauges, sheets, units.
		{gaugeWith("EN_1.6", "superb"), 2, `"superb"`, "EN"},
		{gaugeWith("EN_1.6", "-1%"), 2, "-1% of span", "certificate"},
		{gaugeWith("3000psi", "0psi"), 2, "a span of 0 psi", "Read both off"},
		{gaugeWith("10psi", "2000psi"), 2, "divisions of 2000 psi", "Read both off"},
		{gaugeWith("2120-01-10", "2019-01-10"), 2, `--due: "2019-01-10"`, "dates"},
		{gaugeWith("2120-01-10", "soon"), 2, `--due: "soon"`, "2031-03-04"},
		{gaugeWith("G-8", `""`), 2, "Asset is empty", "written"},
		{gaugeWith(" --asset G-8", ""), 2, "--asset is missing", "Give it"},
		{sheetWith("--minus 50psi", ""), 2, "--minus is missing", "tolerance below"},
		{sheetWith("--charge 1000psi --minus 50psi --plus 50psi", ""), 2, "--charge is missing", "reference charge"},
		{sheetWith("50psi", "-50psi"), 2, `"-50 psi"`, "0 or more"},
		{sheet + " --gas argon", 2, `"argon"`, "nitrogen or air"},
		{sheetWith("70F", "900F"), 2, `--at: "900F"`, "inside that range"},
		{sheetWith("--charge 1000psi --minus 50psi --plus 50psi", "--chart nosuch.csv"), 2, `--chart: there is no file or folder "nosuch.csv"`, "CSV file"},
		{sheetWith("--charge 1000psi --minus 50psi --plus 50psi", "--chart chart-few.csv"), 2, `"chart-few.csv"`, "heading"},
		{sheetWith("--charge 1000psi --minus 50psi --plus 50psi", "--chart chart-columns.csv"), 2, `"chart-columns.csv"`, "heading"},
		{sheetWith("--charge 1000psi --minus 50psi --plus 50psi", "--chart chart-unit.csv"), 2, `line 3: "960" has no unit`, "with units"},
		{sheetWith("--charge 1000psi --minus 50psi --plus 50psi", "--chart chart-order.csv"), 2, "1050", "manual"},
		{sheetWith("--charge 1000psi --minus 50psi --plus 50psi", "--chart chart-twice.csv"), 2, "70", "manual"},
		{sheet + " --chart chart-few.csv", 2, `"chart-few.csv"`, "heading"},
		{"unit add --part HA-40", 2, "--serial is missing", "Give it"},
		{"unit fit HA-99/1 --aircraft K --position left", 2, `no unit "HA-99/1"`, "unit add"},
		{"unit fit --aircraft K --position left", 2, "no unit is named", "PART/SERIAL"},
		{"unit fit HA-40/104 --aircraft K --position left --when never", 2, `--when: "never"`, "2031-03-04"},
		{"unit paint", 2, `"paint" is not a command of unit`, "--help"},

		// Hands, entries.
		{"hand admit --name Ben --role pilot --key " + noKey, 2, `"pilot" is not a role`, "technician"},
		{"hand admit --name Ben --role technician --key 12", 2, `--key: "12"`, "key file"},
		{"hand admit --name Ben --role technician --key " + noKey, 2, "key", "written"},
		{"hand admit --by-code", 2, "--role is missing", "Give it"},
		{"hand retire --key zz --reason lost", 2, `--key: "zz"`, "hand list"},
		{"hand retire --key " + noKey, 2, "--reason is missing", "Give it"},
		{"countersign zzzz", 2, `"zzzz" names 0 entries`, "first digits"},
		{"countersign ab", 2, `"ab" names 0 entries`, "4 or more"},
		{"withdraw 0123456789 --reason wrong", 2, `"0123456789" names 0 entries`, "first digits"},
		{"withdraw", 2, "received 0", "--help"},

		// The passphrase, the book, the other laptop.
		{good + " --passphrase-file wrong", 3, "passphrase", "nothing was signed"},
		{good + " --passphrase-file nosuch", 2, `--passphrase-file: there is no file or folder "nosuch"`, "first line"},
		{good + " --passphrase-file nothing", 3, "passphrase", "nothing was signed"},
		{good + " --passphrase-file .", 2, `--passphrase-file: ".": is a directory`, "first line"},
		{"board --book nosuch", 3, `no book in "nosuch"`, "book start"},
		{"board --book pp", 3, `"pp/book": not a directory`, "Restore"},
		{"board extra", 2, `"extra"`, "--help"},
		{"book start --title T --name N", 3, `already`, "another folder"},
		{"book start --title T --name N --book new --passphrase-file short", 2, "4 characters", "8 or more"},
		{"book start --title T --book new", 2, "--name is missing", "Give it"},
		{"book start --title T --name N --book new --pressure-unit stone", 2, `"stone"`, "psi"},
		{"book start --title T --name N --book new --temperature-unit hot", 2, `"hot"`, "F or C"},
		{"book start --title T --name N --book pp/new", 3, `"pp`, "try again"},
		{"book join --code 1234 --name N --book new", 2, `"1234"`, "read it out again"},
		{"book copy b", 3, `"b"`, "new folder"},
		{"book copy", 2, "got 0", "Name one"},
		{"book copy nowhere/copy", 3, `"nowhere/copy"`, "folder above"},
		{"meet --to nowhere", 3, `--to "nowhere"`, "address"},
		{"meet --to 127.0.0.1:1 --for 5s", 3, `--to "127.0.0.1:1"`, "other laptop"},
		{"meet --listen nonsense --for 1s", 3, `nonsense`, "--listen"},
		{"meet --for soon", 2, `--for: "soon"`, "--help"},
		{"audit nosuch", 2, `no folder "nosuch"`, "book copy"},
		{"audit --founding 12", 2, `--founding: "12"`, "64 digits"},
		{"audit --fingerprint xyz", 2, `--fingerprint: "xyz"`, "book show"},
	} {
		t.Run(test.line[:min(60, len(test.line))], func(t *testing.T) {
			before := bookState(t, "b")
			args := strings.Fields(test.line)
			for i := range args {
				args[i] = strings.ReplaceAll(strings.ReplaceAll(args[i], "_", " "), `""`, "")
			}
			if c, _, err := newRoot().Find(args); err == nil && c.Flags().Lookup("passphrase-file") != nil && !slices.Contains(args, "--passphrase-file") {
				args = append(args, "--passphrase-file", "pp")
			}
			status, _, errs := command(t, args...)
			if status != test.status {
				t.Errorf("exit status %d, want %d: %s", status, test.status, errs)
			}
			for _, want := range []string{test.quoted, test.todo} {
				if !strings.Contains(errs, want) {
					t.Errorf("message %q does not contain %q", errs, want)
				}
			}
			if strings.Count(errs, "\n") != 1 || goish.MatchString(errs) || !strings.HasSuffix(errs, ".\n") {
				t.Errorf("not one line of two plain sentences: %q", errs)
			}
			if after := bookState(t, "b"); after != before {
				t.Errorf("the book was %s and is %s", before, after)
			}
			if _, err := os.Stat("new"); err == nil {
				t.Error("a folder for a book is left")
				os.RemoveAll("new")
			}
		})
	}
}
