package level_test

import (
	"bufio"
	"bytes"
	"math"
	"os/exec"
	"strconv"
	"strings"
	"testing"
)

// secondOpinion is the integrated loudness of a file by FFmpeg's ebur128, to the thousandth.
func secondOpinion(t *testing.T, path string) float64 {
	t.Helper()
	out, err := exec.Command("ffmpeg", "-v", "error", "-nostdin", "-i", path, "-map", "0:a:0", "-af",
		"ebur128=metadata=1,ametadata=mode=print:key=lavfi.r128.I:file=-", "-f", "null", "-").Output()
	if err != nil {
		t.Fatalf("ffmpeg %s: %v", path, err)
	}
	last := math.NaN()
	for lines := bufio.NewScanner(bytes.NewReader(out)); lines.Scan(); {
		if text, ok := strings.CutPrefix(lines.Text(), "lavfi.r128.I="); ok {
			if v, err := strconv.ParseFloat(text, 64); err == nil {
				last = v
			}
		}
	}
	return last
}
