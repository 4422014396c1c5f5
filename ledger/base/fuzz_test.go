package base

import (
	"bytes"
	"encoding/csv"
	"math"
	"reflect"
	"slices"
	"strconv"
	"testing"
)

// FuzzLine holds our reader of lines against the standard library's.
func FuzzLine(f *testing.F) {
	for _, line := range []string{`1,2,3`, `,`, ``, `"a","b""c",d`, `"a,b"`, `a"b`, `"a"b`, `"a`, `""`, `"",`, `a,"`, ` "a"`, `"a" `} {
		f.Add([]byte(line))
	}
	f.Fuzz(func(t *testing.T, line []byte) {
		if len(line) == 0 || bytes.ContainsAny(line, "\r\n") {
			return // lines are split before
		}
		fields, _, reason := splitLine(line, nil, nil)
		want, err := csv.NewReader(bytes.NewReader(line)).Read()
		if (reason == "") != (err == nil) {
			t.Fatalf("%q: we say %q, encoding/csv says %v", line, reason, err)
		}
		if err != nil {
			return
		}
		got := make([]string, len(fields))
		for i, b := range fields {
			got[i] = string(b)
		}
		if !slices.Equal(got, want) {
			t.Fatalf("%q: %q, want %q", line, got, want)
		}
	})
}

// FuzzCell holds our short cuts for numbers and ids against the standard library.
func FuzzCell(f *testing.F) {
	for _, s := range []string{"0", "00", "1.5", "-1.5e3", "18446744073709551615", "18446744073709551616", "9007199254740993", "0.1234567890123456",
		"123456789012345.", ".5", "1_000", "0x10", "+1", "1e400", "nan", "Inf", "999999999999999.9", "0.000001", "9223372036854775808"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, b []byte) {
		if len(b) == 0 {
			return
		}
		var id ID
		wantID, err := ParseID(string(b))
		if reason := parseIDCell(b, &id); (reason == "") != (err == nil) || id != wantID {
			t.Fatalf("id %q: %d, %q; want %d, %v", b, id, reason, wantID, err)
		}
		var x float64
		want, err := strconv.ParseFloat(string(b), 64)
		fine := err == nil && !math.IsNaN(want) && !math.IsInf(want, 0) && !bytes.ContainsAny(b, "xX_")
		if reason := parseNumber(b, &x); (reason == "") != fine || fine && x != want {
			t.Fatalf("number %q: %v, %q; want %v, %v", b, x, reason, want, err)
		}
	})
}

// FuzzDescription: whatever volume.json holds, it is read without problem or with one, and what is read has a sound box.
func FuzzDescription(f *testing.F) {
	f.Add([]byte(`{"name": "a", "voxel_nm": [8, 8, 40], "bounds_nm": {"min": [0, 0, 0], "max": [1, 1, 1]}, "seams": [{"axis": "z", "at_nm": 1}], "gaps": []}`))
	f.Add([]byte("\xef\xbb\xbf{}"))
	f.Add([]byte(`{"name": 1}`))
	f.Add([]byte(`[]`))
	f.Fuzz(func(t *testing.T, b []byte) {
		var p problems
		info := parseDescription(b, "", &p, func(string) {})
		if p.any() {
			return
		}
		if !volumeName.MatchString(info.Name) || info.VoxelNM[0] <= 0 {
			t.Fatalf("%+v", info)
		}
		for i := range 3 {
			if !(info.Bounds.Min[i] < info.Bounds.Max[i]) {
				t.Fatalf("%+v", info)
			}
		}
	})
}

// FuzzBlocks: damaged blocks are noticed or read as something, and never crash; what was read is written back alike.
func FuzzBlocks(f *testing.F) {
	g := &geometry{at: [3][]int32{{1, -2, 1e9}, {0, 0, 0}, {-1e9, 5, 5}}, voxels: []int64{1, 1 << 40, 7}, radius: []uint32{0, 1, 500}}
	f.Add(appendGeometry(nil, g))
	t := &touches{start: []uint32{0, 2, 2, 3}, other: []uint32{1, 9, 0}, affinity: []uint8{0, 255, 3}, area: []uint8{1, 2, 3}}
	f.Add(appendTouches(nil, t, 0))
	t.area = nil
	f.Add(appendTouches(nil, t, 0))
	around := box{min: [3]int32{-5, 0, 1}, max: [3]int32{5, 0, 1e9}}
	f.Add(appendSegments(nil, []segmentRecord{{id: math.MaxUint64, size: 1, voxels: 3, box: around}, {id: 2, size: 2, in: 1 << 33, box: around}, {id: 3, size: 1, assumed: 9, box: around}}))
	f.Add(appendTruths(nil, &truths{[]bool{true, false, true}, []uint64{math.MaxUint64, 0, 4}}))
	f.Add(appendBoxes(nil, []box{around, around, around}))
	f.Add(seal(appendGeometry(nil, g), true))
	f.Fuzz(func(t *testing.T, b []byte) {
		const n, lo = 3, 4096
		if g, err := readGeometry(b, n); err == nil {
			again, err := readGeometry(appendGeometry(nil, g), n)
			if err != nil || !reflect.DeepEqual(again, g) {
				t.Fatalf("geometry %+v comes back as %+v, %v", g, again, err)
			}
		}
		if x, err := readTouches(b, n, lo); err == nil {
			again, err := readTouches(appendTouches(nil, x, lo), n, lo)
			if err != nil || !slices.Equal(again.other, x.other) || !slices.Equal(again.start, x.start) || !bytes.Equal(again.area, x.area) {
				t.Fatalf("contacts %+v come back as %+v, %v", x, again, err)
			}
		}
		if x, err := readTruths(b, n); err == nil {
			if again, err := readTruths(appendTruths(nil, x), n); err != nil || !reflect.DeepEqual(again, x) {
				t.Fatalf("truths %+v come back as %+v, %v", x, again, err)
			}
		}
		readSegments(b, n, lo) //nolint:errcheck // only must not crash
		readBoxes(b, n)        //nolint:errcheck // likewise
		unseal(b)              //nolint:errcheck // likewise
	})
}
