package base

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
)

// describeFile is the table that problems of volume.json are reported under.
const describeFile = "volume.json"

// volumeName is what a volume may be called: it stands in addresses and on command lines.
var volumeName = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9._-]{0,99}$`)

// axes by number.
var axes = []string{"x", "y", "z"}

// describe is volume.json.
type describe struct {
	Name     *string   `json:"name"`
	VoxelNM  []float64 `json:"voxel_nm"`
	BoundsNM *struct {
		Min []float64 `json:"min"`
		Max []float64 `json:"max"`
	} `json:"bounds_nm"`
	Seams []struct {
		Axis string   `json:"axis"`
		AtNM *float64 `json:"at_nm"`
	} `json:"seams"`
	Gaps []struct {
		Axis   string   `json:"axis"`
		FromNM *float64 `json:"from_nm"`
		ToNM   *float64 `json:"to_nm"`
	} `json:"gaps"`
}

// largestDescription bounds volume.json.
const largestDescription = 1 << 20

// readDescription reads volume.json. name overrides the name in it.
func readDescription(dir, name string, p *problems, warn func(string)) (Info, error) {
	f, err := os.Open(filepath.Join(dir, describeFile))
	if errors.Is(err, os.ErrNotExist) {
		p.add(describeFile, 0, "", "", "is missing")
		return Info{}, nil
	}
	if err != nil {
		return Info{}, err
	}
	defer f.Close() //nolint:errcheck // read only
	b, err := io.ReadAll(io.LimitReader(f, largestDescription+1))
	if err != nil {
		return Info{}, err
	}
	return parseDescription(b, name, p, warn), nil
}

// parseDescription checks volume.json; what is wrong is noted.
func parseDescription(b []byte, name string, p *problems, warn func(string)) Info {
	b = bytes.TrimPrefix(b, []byte("\xef\xbb\xbf"))
	var d describe
	if err := decodeDescription(b, &d, warn); err != nil {
		p.add(describeFile, jsonLine(b, err), jsonField(err), "", "cannot be read: "+err.Error())
		return Info{}
	}
	info := Info{Name: name, Seams: []Seam{}, Gaps: []Gap{}}
	if info.Name == "" && d.Name != nil {
		info.Name = *d.Name
	}
	switch {
	case info.Name == "":
		p.add(describeFile, 0, "name", "", "is missing")
	case !volumeName.MatchString(info.Name):
		p.add(describeFile, 0, "name", info.Name, "is not a name: up to 100 letters, digits, dots, dashes and underscores, a letter or digit first")
	}
	d.voxel(&info, p)
	d.bounds(&info, p)
	d.planes(&info, p)
	return info
}

// decodeDescription reads strictly, and once more leniently when only unknown fields stand in the way.
func decodeDescription(b []byte, d *describe, warn func(string)) error {
	if len(b) > largestDescription {
		return errors.New("it is larger than 1 MiB")
	}
	strict := json.NewDecoder(bytes.NewReader(b))
	strict.DisallowUnknownFields()
	err := strict.Decode(d)
	if err != nil && strings.Contains(err.Error(), "unknown field") {
		*d = describe{}
		if err := json.Unmarshal(b, d); err != nil {
			return err
		}
		warn(describeFile + " has a field that is not read: " + strings.TrimPrefix(err.Error(), "json: unknown field "))
		return nil
	}
	if err != nil {
		return err
	}
	if _, err := strict.Token(); err != io.EOF {
		return errors.New("something follows the object")
	}
	return nil
}

// jsonLine is the line of a syntax or type error, 0 when the error has no place.
func jsonLine(b []byte, err error) int64 {
	var s *json.SyntaxError
	var t *json.UnmarshalTypeError
	var at int64
	switch {
	case errors.As(err, &s):
		at = s.Offset
	case errors.As(err, &t):
		at = t.Offset
	default:
		return 0
	}
	return int64(bytes.Count(b[:min(at, int64(len(b)))], []byte("\n"))) + 1
}

func jsonField(err error) string {
	var t *json.UnmarshalTypeError
	if errors.As(err, &t) {
		return t.Field
	}
	return ""
}

func (d *describe) voxel(info *Info, p *problems) {
	if len(d.VoxelNM) != 3 {
		p.add(describeFile, 0, "voxel_nm", fmt.Sprint(d.VoxelNM), "is not three numbers, the size of a voxel along x, y and z")
		return
	}
	for i, v := range d.VoxelNM {
		if v <= 0 || v > largestNM {
			p.add(describeFile, 0, "voxel_nm", fmt.Sprint(v), "is not a size in nm above 0")
		}
		info.VoxelNM[i] = v
	}
}

func (d *describe) bounds(info *Info, p *problems) {
	if d.BoundsNM == nil || len(d.BoundsNM.Min) != 3 || len(d.BoundsNM.Max) != 3 {
		p.add(describeFile, 0, "bounds_nm", "", "is not a box: give min and max with three numbers each")
		return
	}
	for i, axis := range axes {
		low, high := d.BoundsNM.Min[i], d.BoundsNM.Max[i]
		if low >= high || math.Abs(low) > largestNM || math.Abs(high) > largestNM {
			p.add(describeFile, 0, "bounds_nm", fmt.Sprintf("%v to %v", low, high), "does not grow along "+axis+", or exceeds 1 m")
			return
		}
	}
	info.Bounds = Bounds{Min: Point(d.BoundsNM.Min), Max: Point(d.BoundsNM.Max)}
}

func (d *describe) planes(info *Info, p *problems) {
	within := func(v *float64) bool { return v != nil && math.Abs(*v) <= largestNM }
	for _, s := range d.Seams {
		axis := slices.Index(axes, s.Axis)
		if axis < 0 {
			p.add(describeFile, 0, "seams.axis", s.Axis, "is not x, y or z")
		}
		if !within(s.AtNM) {
			p.add(describeFile, 0, "seams.at_nm", "", "is missing or exceeds 1 m")
			continue
		}
		info.Seams = append(info.Seams, Seam{Axis: axis, AtNM: *s.AtNM})
	}
	for _, g := range d.Gaps {
		axis := slices.Index(axes, g.Axis)
		if axis < 0 {
			p.add(describeFile, 0, "gaps.axis", g.Axis, "is not x, y or z")
		}
		if !within(g.FromNM) || !within(g.ToNM) || *g.FromNM > *g.ToNM {
			p.add(describeFile, 0, "gaps.from_nm", "", "from_nm and to_nm are not a stretch")
			continue
		}
		info.Gaps = append(info.Gaps, Gap{Axis: axis, FromNM: *g.FromNM, ToNM: *g.ToNM})
	}
}
