package instrument

import (
	"errors"
	"reflect"
	"strings"
	"testing"

	"mirrorloom/configs"
	"mirrorloom/pipeline/config"
)

// FuzzProfile: any text is a profile that passes its own checks, whose resolved
// text is the same profile and whose derived values are sound, or is refused in
// one sentence with a nil profile. It never panics.
func FuzzProfile(f *testing.F) {
	f.Add([]byte(plain))
	for _, name := range Names() {
		data, err := configs.Read(configs.Profiles, name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data)
	}
	f.Add([]byte(strings.Replace(plain, "columns: 100", "columns: 32768", 1)))
	f.Add([]byte(strings.Replace(plain, "mounting: square", "mounting: diagonal", 1)))
	f.Add([]byte(strings.Replace(plain, "count: 41", "count: 65536", 1)))
	f.Add([]byte(strings.Replace(plain, "[2, 0.001, 0]", "[1e308, 1e308, -1e308]", 1)))
	f.Add([]byte(strings.Replace(plain, "[61, 110, 1, 40]", "[9223372036854775807, -9223372036854775808, 1, 40]", 1)))
	f.Fuzz(func(t *testing.T, data []byte) {
		p, err := Parse("p.yaml", data, besideStuck(plainStuck))
		if err != nil {
			var refusal *config.Error
			if p != nil || !errors.As(err, &refusal) || strings.ContainsAny(err.Error(), "\r\n") {
				t.Fatalf("profile %v with the error %q", p, err)
			}
			return
		}
		if err := p.Validate(); err != nil {
			t.Fatalf("accepted, but not valid: %v", err)
		}
		text, err := p.YAML()
		if err != nil {
			t.Fatalf("accepted, but cannot be written: %v", err)
		}
		back, err := Parse("p.yaml", text, besideStuck(plainStuck))
		if err != nil {
			t.Fatalf("written, but refused: %v\n%s", err, text)
		}
		if !reflect.DeepEqual(p, back) {
			t.Fatalf("came back changed\n%s", text)
		}
		if p.SHA() != back.SHA() || p.Detector.RawColumns() < p.Detector.Columns || p.Detector.RawRows() < p.Detector.Rows {
			t.Fatalf("unsound derived values\n%s", text)
		}
	})
}
