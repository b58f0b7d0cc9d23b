package main

import (
	"os"
	"regexp"
	"strings"
	"time"

	"github.com/rogpeppe/go-internal/testscript"
)

// readme SECTION FILE writes the commands that stand in a section of README to a file for the shell. A calibration lasts for a year and
// this test for longer: days of calibration become a year ago, days due a year from now.
func readme(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 2 {
		ts.Fatalf("usage: readme section file")
	}
	data, err := os.ReadFile("../../README.md")
	ts.Check(err)
	_, section, found := strings.Cut(string(data), "\n### "+args[0]+"\n")
	if !found {
		ts.Fatalf("README has no section %q", args[0])
	}
	var commands strings.Builder
	for l := range strings.Lines(section) {
		if c, ok := strings.CutPrefix(l, "    "); ok {
			commands.WriteString(c)
		} else if commands.Len() > 0 {
			break
		}
	}
	text := commands.String()
	for flag, years := range map[string]int{"--calibrated ": -1, "--due ": 1} {
		text = regexp.MustCompile(flag+`\S+`).ReplaceAllString(text, flag+time.Now().AddDate(years, 0, 0).Format(time.DateOnly))
	}
	ts.Check(os.WriteFile(ts.MkAbs(args[1]), []byte(text), 0o600))
}
