package web

import (
	"math"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// rides says whether a recording's gain moves.
func rides(recordingID int64) bool { return recordingID%4 == 2 }

// doubted is held for three doubts, of which one is a fault of its source, and one is about the whole.
const doubted = 18

// inventTreatment invents what was done in a job that planned something.
func inventTreatment(j *store.Job) {
	j.Doubts = []level.Doubt{}
	if j.Plan == nil || j.After == nil {
		return
	}
	p := j.Plan
	p.Anchor, p.Anchored, p.Aim = profile.Programme, audio.LUFS(*j.Before.Integrated), -18
	p.Delivered = profile.Delivered{Bits: 24, Dither: profile.Triangular}
	if rides(j.RecordingID) {
		p.Ride = &level.Ride{Speed: profile.Slow, Kept: 0.42, Range: audio.LU(*j.After.Range), Least: -6.2, Most: 6, FloorLift: 1.8, FloorAt: 18.2}
		p.Compressor = &dynamics.Compression{Threshold: -15, Ratio: 3, Knee: 6, Release: 0.08}
	}
	j.Foreseen = j.After
	j.Treatment = &level.Treatment{Order: 0.97}
	if p.Compressor != nil {
		j.Treatment.Compressed = 2.3
	}
	if p.Limit {
		j.Treatment.Limited1, j.Treatment.Limited3, j.Treatment.Deepest, j.Treatment.DeepestAt = 0.031, 0.0004, 5.2, 41.7
	}
	if j.RecordingID == doubted {
		j.Doubts = []level.Doubt{
			{Code: "clipped", Words: "clipped 214 times, first at 1:23.2", At: new(audio.Seconds(83.24))},
			{Code: "limiting", Words: "its peaks are held by more than 3 dB in 31 % of the time: listen at 0:41.7", At: new(audio.Seconds(41.7))},
			{Code: "floor", Words: "its noise floor is 12 dB louder than it was"},
		}
	}
}

// ride invents the gain of a recording over time, within what its plan says.
func (f *fake) ride(r store.Recording) any {
	for _, j := range f.jobList {
		if j.RecordingID != r.ID || j.Plan == nil || j.Plan.Ride == nil || r.After == nil {
			continue
		}
		gain := make([]float64, int(*r.Duration*10)+1)
		for i := range gain {
			t := float64(i) / 10
			gain[i] = math.Round(100*(-0.1-6.1*(0.7*math.Sin(t/17)+0.3*math.Sin(t/5.3+1)))) / 100
		}
		return gin.H{"gain_db": gain, "steady_db": j.Plan.Gain}
	}
	return nil
}
