package main

import (
	"bytes"
	"encoding/json"
	"math"
	"testing"
)

// Masses and volumes from an independent program that implements Tanaka 2001 with
// dissolved air and compressibility, CIPM-2007 and the volume formula of ISO 4787;
// temperature of the air as of the water, expansion 9.9e-6 /°C.
func TestOneWeighingToOneVolume(t *testing.T) {
	for _, tt := range []struct {
		temp, hPa, humidity, mass string
		volume, volume20          float64
	}{
		{"20", "1013.25", "50", "10", 10.028537, 10.028537},
		{"22", "1013.25", "50", "9.9700", 10.002724, 10.002525},
		{"25", "950", "40", "24.9", 24.998118, 24.996880},
		{"18", "1000", "60", "49.8", 49.922199, 49.923188},
		{"23.4", "992", "35", "9.9512", 9.986898, 9.986562},
	} {
		var out, complaints bytes.Buffer
		code := tenthmark([]string{"volume", "--json", "--mass", tt.mass, "--water-temp", tt.temp, "--pressure", tt.hPa, "--humidity", tt.humidity}, stdio{out: &out, err: &complaints})
		var got struct {
			Volume   float64 `json:"volume_mL"`
			Volume20 float64 `json:"volume_20C_mL"`
			Expanded float64 `json:"U_mL"`
		}
		if err := json.Unmarshal(out.Bytes(), &got); err != nil || code != exitDone {
			t.Fatalf("exit %d, %v\n%s", code, err, &complaints)
		}
		if math.Abs(got.Volume-tt.volume) > 1e-6 || math.Abs(got.Volume20-tt.volume20) > 1e-6 || got.Expanded <= 0 {
			t.Errorf("%s g at %s °C: %.6f and %.6f mL, want %.6f and %.6f", tt.mass, tt.temp, got.Volume, got.Volume20, tt.volume, tt.volume20)
		}
	}
}

func TestWrongCallsOfVolume(t *testing.T) {
	for _, args := range [][]string{{}, {"--mass", "10"}, {"--mass", "nan", "--water-temp", "20"}, {"--mass", "10", "--water-temp", "20", "extra"}} {
		var out, complaints bytes.Buffer
		if code := tenthmark(append([]string{"volume"}, args...), stdio{out: &out, err: &complaints}); code != exitUsage || out.Len() > 0 || complaints.Len() == 0 {
			t.Errorf("%v: exit %d, printed %q, complained %q", args, code, &out, &complaints)
		}
	}
	var out, complaints bytes.Buffer
	if code := tenthmark([]string{"volume", "--mass", "10", "--water-temp", "55"}, stdio{out: &out, err: &complaints}); code != exitFailed || out.Len() > 0 {
		t.Errorf("water of 55 °C: exit %d, printed %q", code, &out)
	}
}
