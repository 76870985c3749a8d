package main

import (
	"slices"
	"testing"
	"testing/synctest"
	"time"
)

func TestProgress(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var lines []string
		p := startProgress(time.Second, func() (int64, int64) { return 250, 1000 }, func(line string) { lines = append(lines, line) })
		p.Add(900)
		time.Sleep(2500 * time.Millisecond) // on the bubble's clock
		p.Close()
		want := []string{
			"900 pixels, 900/s, 25 % of the file, 3s left",
			"900 pixels, 450/s, 25 % of the file, 6s left",
			"900 pixels, 360/s, 25 % of the file, 8s left",
		}
		if !slices.Equal(lines, want) {
			t.Errorf("reported %q, want %q", lines, want)
		}
	})
}

func TestProgressOfAPipe(t *testing.T) {
	got := progressLine(2*time.Second, 10, func() (int64, int64) { return 500, -1 })
	if want := "10 pixels, 5/s"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
}
