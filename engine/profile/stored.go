package profile

import (
	"encoding/json"

	"evenshelf/engine/audio"
)

// UnmarshalStored reads a profile from the JSON it was kept as. What a version of Evenshelf that kept it did not know
// yet is as usual, which was all there was then: one steady gain and a ceiling.
func UnmarshalStored(document []byte) (Profile, error) {
	p := usual
	if err := json.Unmarshal(document, &p); err != nil {
		return Profile{}, err
	}
	// The first version had these two at the top.
	first := struct {
		Limiting *audio.DB `json:"limiting_db"`
		Lift     *audio.DB `json:"lift_db"`
	}{&p.Limiter.Most, &p.Harm.Lift}
	return p, json.Unmarshal(document, &first)
}
