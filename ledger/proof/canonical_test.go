package proof

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"testing"
)

// The sample of RFC 8785, section 3.2.2, and the SHA-256 of its result (recalled from memory; two independent libraries,
// gowebpki/jcs and npm canonicalize, agree).
func TestSampleOfRFC8785(t *testing.T) {
	in := json.RawMessage(`{"numbers":[333333333.33333329,1E30,4.50,2e-3,0.000000000000000000000000001],` +
		`"string":"\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/","literals":[null,true,false]}`)
	const want = `{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],"string":"€$\u000f\nA'B\"\\\\\"/"}`
	got, err := Canonical(in)
	if err != nil || string(got) != want {
		t.Fatalf("got  %s, %v\nwant %s", got, err, want)
	}
	sum := sha256.Sum256(got)
	if hex.EncodeToString(sum[:]) != "2d5e01a318d0f0879ab568c4be289c8b1f64ef8921a53c6277d5e069978baacb" {
		t.Errorf("SHA-256 %x", sum)
	}
}

// Members are ordered by UTF-16 code units (RFC 8785, section 3.2.3; recalled from memory, two libraries agree).
func TestMembersAreOrderedByUTF16(t *testing.T) {
	got, err := Canonical(json.RawMessage(`{"\u20ac":1,"\r":2,"\ufb33":3,"1":4,"\ud83d\ude00":5,"\u0080":6,"\u00f6":7}`))
	if err != nil || string(got) != "{\"\\r\":2,\"1\":4,\"\u0080\":6,\"ö\":7,\"€\":1,\"\U0001f600\":5,\"\ufb33\":3}" {
		t.Errorf("got %s, %v", got, err)
	}
}

func TestNothingIsRounded(t *testing.T) {
	for _, v := range []any{uint64(1<<53 + 1), int64(-1<<53 - 1), ^uint64(0), "\xff"} {
		if b, err := Canonical(map[string]any{"id": v}); err == nil {
			t.Errorf("%v became %s", v, b)
		}
	}
	for _, v := range []any{1 << 53, "18446744073709551615", 0.25, "\ufffd <&>", `c:\ufffd`, -1 << 53, 1e-7} {
		if _, err := Canonical(map[string]any{"id": v}); err != nil {
			t.Errorf("%v: %v", v, err)
		}
	}
}
