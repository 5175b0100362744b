package ledger

import (
	"context"
	"crypto/sha256"
	"database/sql"
	"encoding/hex"
	"time"

	"lapgate/pipeline"
)

// Recipe is a recipe's text as it was in force.
type Recipe struct {
	Hash                    string // "sha256:" + hex of Text; empty = computed
	Part, Revision, Surface string
	File                    string
	Text                    string
	Added                   time.Time // given by the ledger
}

// PutRecipe keeps a recipe's text under its hash; one that is kept already stays as it is.
func (s *Store) PutRecipe(ctx context.Context, r Recipe) error {
	sum := sha256.Sum256([]byte(r.Text))
	hash := "sha256:" + hex.EncodeToString(sum[:])
	if r.Hash != "" && r.Hash != hash {
		return pipeline.Invalid("recipe hash: got %s, want %s, which is that of the text", r.Hash, hash)
	}
	return s.write(ctx, func(tx *sql.Tx) error {
		_, err := tx.ExecContext(ctx, `INSERT INTO recipes (hash, part, revision, surface, file, body, added_us)
			VALUES ($1, $2, $3, $4, $5, $6, $7) ON CONFLICT (hash) DO NOTHING`,
			hash, r.Part, r.Revision, r.Surface, r.File, r.Text, micros(s.Now()))
		return err
	})
}

// Recipe returns the recipe with this text hash.
func (s *Store) Recipe(ctx context.Context, hash string) (Recipe, error) {
	all, err := s.recipes(ctx, `hash = $1`, hash)
	if err != nil {
		return Recipe{}, err
	}
	if len(all) == 0 {
		return Recipe{}, pipeline.NotFound("recipe %s: not on record", hash)
	}
	return all[0], nil
}

// Recipes returns the recipes of a part, or all, newest first.
func (s *Store) Recipes(ctx context.Context, part string) ([]Recipe, error) {
	if part == "" {
		return s.recipes(ctx, `1 = 1`)
	}
	return s.recipes(ctx, `part = $1`, part)
}

func (s *Store) recipes(ctx context.Context, where string, args ...any) ([]Recipe, error) {
	var out []Recipe
	err := each(ctx, s.reader, func(rows *sql.Rows) error {
		var r Recipe
		var added int64
		err := rows.Scan(&r.Hash, &r.Part, &r.Revision, &r.Surface, &r.File, &r.Text, &added)
		r.Added = fromMicros(added)
		out = append(out, r)
		return err
	}, `SELECT hash, part, revision, surface, file, body, added_us FROM recipes WHERE `+where+` ORDER BY added_us DESC, hash`, args...)
	return out, s.engine.classify(err)
}

// Calibration is what is kept of a calibration: its provenance, not its pictures.
type Calibration struct {
	Hash                string // of its content
	Camera, Light, Mode string
	MadeAt              string // RFC 3339
	Text                string // the calibration's own description
	Added               time.Time
}

// PutCalibration keeps a calibration's text under its hash; one that is kept already
// stays as it is.
func (s *Store) PutCalibration(ctx context.Context, c Calibration) error {
	if c.Hash == "" {
		return pipeline.Invalid("calibration hash: not given")
	}
	return s.write(ctx, func(tx *sql.Tx) error {
		_, err := tx.ExecContext(ctx, `INSERT INTO calibrations (hash, camera, light, mode, made_at, body, added_us)
			VALUES ($1, $2, $3, $4, $5, $6, $7) ON CONFLICT (hash) DO NOTHING`,
			c.Hash, c.Camera, c.Light, c.Mode, c.MadeAt, c.Text, micros(s.Now()))
		return err
	})
}

// Calibration returns the calibration with this hash.
func (s *Store) Calibration(ctx context.Context, hash string) (Calibration, error) {
	c := Calibration{Hash: hash}
	var added int64
	err := s.reader.QueryRowContext(ctx, `SELECT camera, light, mode, made_at, body, added_us FROM calibrations WHERE hash = $1`, hash).
		Scan(&c.Camera, &c.Light, &c.Mode, &c.MadeAt, &c.Text, &added)
	c.Added = fromMicros(added)
	return c, s.engine.classify(orMissing(err, "calibration %s: not on record", hash))
}
