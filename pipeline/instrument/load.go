package instrument

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"maps"
	"slices"

	"mirrorloom/configs"
	"mirrorloom/pipeline/config"
)

// Names lists the embedded profiles in alphabetical order.
func Names() []string { return configs.Names(configs.Profiles) }

// Load reads the profile of a file, or the embedded one of that name, with the
// CSV files that it names, and checks it. Errors are of type *config.Error with
// file, line and key path, or say which file could not be read (wrapping
// fs.ErrNotExist where there is none).
func Load(pathOrName string) (*Profile, error) {
	source, err := config.Find(configs.Profiles, pathOrName)
	if err != nil {
		return nil, err
	}
	return Parse(source.Name, source.Data, source.Beside)
}

// Parse reads a profile from text; name is what errors call the file, and
// beside reads a file that the profile names (nil when it may name none).
func Parse(name string, data []byte, beside func(file string) ([]byte, error)) (*Profile, error) {
	doc, err := config.Parse(name, data)
	if err != nil {
		return nil, err
	}
	p := new(Profile)
	if err := doc.Decode(p); err != nil {
		return nil, err
	}
	if err := p.check(doc); err != nil {
		return nil, err
	}
	if err := p.readStuck(doc, beside); err != nil {
		return nil, err
	}
	return p, nil
}

// YAML is the profile as resolved, defaults written out: the same text for
// equal profiles on every machine. Read with the files of Files beside it, it
// gives an equal profile.
func (p *Profile) YAML() ([]byte, error) { return config.Encode(p) }

// Files returns the content of the CSV files that the profile names, by name; a
// fresh map of slices that are not to be changed.
func (p *Profile) Files() map[string][]byte {
	files := make(map[string][]byte, len(p.files))
	maps.Copy(files, p.files)
	return files
}

// SHA is the SHA-256, in 64 hexadecimal digits, of YAML followed by the files of
// Files in the order of their names, so that a profile with other stuck mirrors
// is another profile. Without such files it is that of YAML alone.
func (p *Profile) SHA() string {
	hash := sha256.New()
	text, err := p.YAML()
	if err != nil { // a checked profile has nothing that YAML cannot hold
		panic(fmt.Sprintf("internal error: profile %s cannot be written: %v", p.Name, err))
	}
	hash.Write(text)
	for _, name := range slices.Sorted(maps.Keys(p.files)) {
		hash.Write(p.files[name])
	}
	return hex.EncodeToString(hash.Sum(nil))
}
