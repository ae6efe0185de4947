package trial

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/register"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Telescope is one whose device lies otherwise than its profile says: turned, of another
// scale and parity, and off the place that it was asked to point to.
type Telescope struct {
	RotationDeg, Scale float64
	Parity             int
	// OffsetU and OffsetW are those of the device's middle along its axes, arc seconds.
	OffsetU, OffsetW float64
}

// lies is where on the sky the device's places lie, so many mirrors along u and w from its
// middle, when the telescope is asked for a place and a position angle; arcsec is a
// mirror's side by the profile.
func (t Telescope) lies(raDeg, decDeg, rotangDeg, arcsec float64) func(u, w float64) (raDeg, decDeg float64) {
	sin, cos := math.Sincos((rotangDeg + t.RotationDeg) * math.Pi / 180)
	along := func(u, w float64) (east, north float64) {
		u *= float64(t.Parity)
		return -u*cos + w*sin, u*sin + w*cos
	}
	return func(u, w float64) (float64, float64) {
		east, north := along(t.OffsetU+t.Scale*arcsec*u, t.OffsetW+t.Scale*arcsec*w)
		return physics.FromGnomonic(east, north, raDeg, decDeg)
	}
}

// stars writes the list of the field's stars where a device lies on the sky so.
func (n *Night) stars(lies func(u, w float64) (raDeg, decDeg float64)) (string, error) {
	f := n.Field
	a := f.Profile.ArcsecPerU()
	first, last := math.MaxInt, math.MinInt
	for _, e := range n.Seq.Elements {
		if !e.Dark {
			first, last = min(first, e.First), max(last, e.Last)
		}
	}
	middle := float64(first+last)/2 - f.Profile.UCenter()
	text := "name,ra_deg,dec_deg\n"
	halfU, halfW := f.HalfArcsec()
	for i, at := range StarPlaces {
		ra, dec := lies(at[0]*halfU/a+middle, at[1]*halfW/a)
		text += fmt.Sprintf("star %d,%.9f,%.9f\n", i+1, ra, dec)
	}
	path := filepath.Join(n.Dir, "stars.csv")
	return path, os.WriteFile(path, []byte(text), 0o644)
}

// reduceOn reduces a night on the stars of a list.
func (n *Night) reduceOn(ctx context.Context, list, fit string) (*reduce.Result, error) {
	recipe, err := reduce.LoadRecipe("nominal")
	if err != nil {
		return nil, err
	}
	recipe.Stars = reduce.StarsRecipe{Use: list, Fit: fit, SearchArcsec: 3}
	result, err := n.Reduce(ctx, Noisy, reduce.Options{Cube: true, Recipe: recipe})
	if err == nil && result.Run.Stars == nil {
		err = fmt.Errorf("the stars were not found: %v", result.Degraded)
	}
	return result, err
}

// Registered has a telescope with errors scan a field of stars with single columns, takes
// its registration, plans a coded night with it, and sends the telescope where the plan
// says.
func (t Telescope) Registered(ctx context.Context, name, dir string) ([]Finding, error) {
	field, err := Square()
	if err != nil {
		return nil, err
	}
	original := *field.Profile
	field.SetCode("slit-scan", 47, 0)
	scan, err := field.Plan(ctx, filepath.Join(dir, "scan"))
	if err != nil {
		return nil, err
	}
	if err := scan.Rehearse(ctx, Noisy, rehearse.Options{Seed: 1}); err != nil {
		return nil, err
	}
	target := *field.Target
	list, err := scan.stars(t.lies(target.RADeg, target.DecDeg, target.RotangDeg, original.ArcsecPerU()))
	if err != nil {
		return nil, err
	}
	result, err := scan.reduceOn(ctx, list, register.Similarity)
	if err != nil {
		return nil, err
	}
	path := filepath.Join(scan.Run(Noisy), register.File)
	got, err := register.Read(path)
	if err != nil {
		return nil, err
	}
	findings := t.findings(name, got)
	outsider, err := againstOutside(ctx, dir, name, list, scan.CubePath(Noisy), result)
	if err != nil && !errors.Is(err, outside.ErrMissing) {
		return nil, err
	}
	findings = append(findings, outsider...)
	pointed, err := t.pointed(ctx, name, filepath.Join(dir, "coded"), field, path)
	return append(findings, pointed...), err
}

// findings compare a registration with what the telescope is.
func (t Telescope) findings(name string, got *register.Registration) []Finding {
	parity := Stated(name+": parity", float64(got.Parity), got.Stars)
	parity.OK = got.Parity == t.Parity
	return []Finding{
		Near(name+": rotation, degrees", got.RotationDeg, t.RotationDeg, 0.1, got.RotationErrorDeg, got.Stars),
		Near(name+": scale", got.Scale, t.Scale, 0.001, got.ScaleError, got.Stars),
		Near(name+": offset along u, arc seconds", got.OffsetUArcsec, t.OffsetU, 0.05, got.OffsetErrorArcsec, got.Stars),
		Near(name+": offset along w, arc seconds", got.OffsetWArcsec, t.OffsetW, 0.05, got.OffsetErrorArcsec, got.Stars),
		parity,
		AtLeast(name+": stars used", float64(got.Stars), 4, got.Stars),
	}
}

// againstOutside compares the cube's world coordinates, as its header has them, with those
// that astropy fits to the same places of the same stars: the distance at the field's
// corners in voxels.
func againstOutside(ctx context.Context, dir, name, list, cube string, result *reduce.Result) ([]Finding, error) {
	stars, err := register.ReadStars(list)
	if err != nil {
		return nil, err
	}
	f, err := fitsutil.Open(cube)
	if err != nil {
		return nil, err
	}
	defer f.Close() // only read from
	im, err := f.ImageNamed(product.Signal)
	if err != nil {
		return nil, err
	}
	s, err := product.ReadSchema(im.Header, im.Axes)
	if err != nil {
		return nil, err
	}
	var in struct {
		X, Y, RA, Dec []float64
		Corners       [][2]float64
	}
	for i, found := range result.Run.Stars.Stars {
		if found.Used {
			in.X, in.Y = append(in.X, *found.Element), append(in.Y, *found.Row)
			in.RA, in.Dec = append(in.RA, stars[i].RADeg), append(in.Dec, stars[i].DecDeg)
		}
	}
	j, y := float64(s.Elements-1), float64(s.Rows-1)
	in.Corners = [][2]float64{{0, 0}, {j, 0}, {0, y}, {j, y}}
	text, err := json.Marshal(in)
	if err != nil {
		return nil, err
	}
	path := filepath.Join(dir, "points.json")
	if err := os.WriteFile(path, text, 0o644); err != nil {
		return nil, err
	}
	answer, err := outside.Script(ctx, "register_points.py", path)
	if err != nil {
		return nil, err
	}
	var corners [][2]float64
	if err := json.NewDecoder(strings.NewReader(answer)).Decode(&corners); err != nil {
		return nil, err
	}
	worst := 0.0
	for i, c := range in.Corners {
		j, y := s.PlaceOf(corners[i][0], corners[i][1])
		worst = max(worst, math.Hypot(j-c[0], y-c[1]))
	}
	return []Finding{Below(name+": coordinates at the corners against astropy's fit of six parameters, voxels", worst, 0.2, len(in.X))}, nil
}

// pointed plans a coded night of the field by the registration and points the telescope
// as the plan says.
func (t Telescope) pointed(ctx context.Context, name, dir string, field *Field, registration string) ([]Finding, error) {
	original := field.Profile.ArcsecPerU()
	field.SetCode("m-sequence", smallV, smallDark)
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, err
	}
	in := plan.Options{Target: filepath.Join(dir, "target.yaml"), Profile: filepath.Join(dir, "profile.yaml"), Registration: registration}
	n := &Night{Dir: dir, Field: field}
	in.Out = n.SequencePath()
	for path, text := range map[string]func() ([]byte, error){in.Target: field.Target.YAML, in.Profile: field.Profile.YAML} {
		data, err := text()
		if err != nil {
			return nil, err
		}
		if err := os.WriteFile(path, data, 0o644); err != nil {
			return nil, err
		}
	}
	summary, err := plan.Run(ctx, in)
	if err != nil {
		return nil, err
	}
	if n.Seq, err = sequence.Read(ctx, in.Out); err != nil {
		return nil, err
	}
	field.Profile, field.Target = n.Seq.Profile, n.Seq.Target
	placed := &Field{Profile: field.Profile, Target: field.Target, Scene: &rehearse.Scene{Sky: field.Scene.Sky}}
	placed.addStars(16.4, 500, 1.2)
	n.Field = placed
	if err := n.Rehearse(ctx, Noisy, rehearse.Options{Seed: 2}); err != nil {
		return nil, err
	}
	to := summary.Pointing
	list, err := n.stars(t.lies(to.RADeg, to.DecDeg, to.RotangDeg, original))
	if err != nil {
		return nil, err
	}
	result, err := n.reduceOn(ctx, list, register.Pointing)
	if err != nil {
		return nil, err
	}
	s := result.Run.Stars
	return []Finding{
		Near(name+": the field planned by it, east of where it was asked for, arc seconds", s.East.Value, 0, 0.05, s.East.Error, s.Used),
		Near(name+": and north", s.North.Value, 0, 0.05, s.North.Error, s.Used),
		Near(name+": turned against what was asked for, degrees", s.Turn.Value, 0, 0.1, s.Turn.Error, s.Used),
		Below(name+": rms of the stars, arc seconds", s.RMSArcsec, 0.1, s.Used),
	}, nil
}
