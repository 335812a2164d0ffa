package store

import (
	"context"
	"database/sql"
	"encoding/json"
	"fmt"

	"evenshelf/engine/profile"
)

// SaveProfile keeps this version of a profile. Saving a version again changes nothing.
func (s *Store) SaveProfile(ctx context.Context, p profile.Profile) error {
	return s.write(ctx, func(tx *sql.Tx) error { return saveProfile(ctx, tx, p) })
}

func saveProfile(ctx context.Context, tx *sql.Tx, p profile.Profile) error {
	if err := p.Validate(); err != nil {
		return fmt.Errorf("save profile %q: %w: %w", p.Name, err, ErrInvalid)
	}
	document, err := json.Marshal(p)
	if err != nil {
		return fmt.Errorf("save profile %q: %w", p.Name, err)
	}
	_, err = tx.ExecContext(ctx, `
		INSERT INTO profiles (version, name, target, document, saved_at) VALUES (?, ?, ?, ?, ?)
		ON CONFLICT (version) DO NOTHING`, p.Version(), p.Name, float64(p.Target), string(document), now())
	if err != nil {
		return fmt.Errorf("save profile %q: %w", p.Name, err)
	}
	return nil
}

func findProfile(ctx context.Context, tx *sql.Tx, version string) (profile.Profile, error) {
	return one(ctx, tx, func(row scanner) (p profile.Profile, err error) {
		var document []byte
		if err := row.Scan(&document); err != nil {
			return p, err
		}
		return profile.UnmarshalStored(document)
	}, "profile version "+version, `SELECT document FROM profiles WHERE version = ?`, version)
}
