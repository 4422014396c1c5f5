package base

import (
	"fmt"
	"strconv"

	"github.com/jackc/pgx/v5/pgtype"

	"fettle.example/fettle/internal/fault"
)

// ID is the id of a supervoxel, segment, synapse, nucleus or true neuron: any 64-bit number. As text and in JSON it
// is a decimal string, because a JSON number is a double; in PostgreSQL it is a bigint with the same bits, so ids
// of 2^63 and above look negative there and only equality of them means anything.
type ID uint64

// ParseID reads decimal digits: no sign, no space, no exponent, no leading zero, at most 2^64-1.
func ParseID(s string) (ID, error) {
	n, err := strconv.ParseUint(s, 10, 64)
	if err != nil || s[0] == '+' || len(s) > 1 && s[0] == '0' {
		return 0, fault.Newf(fault.Invalid, "id-malformed", "%q is not an id", clip(s)).
			WithNext("give an id as a whole number from 0 to 18446744073709551615, digits only")
	}
	return ID(n), nil
}

// String is the decimal form that ParseID reads.
func (id ID) String() string { return strconv.FormatUint(uint64(id), 10) }

// MarshalText gives the decimal form; JSON writes it as a string.
func (id ID) MarshalText() ([]byte, error) { return strconv.AppendUint(nil, uint64(id), 10), nil }

// UnmarshalText reads what ParseID reads.
func (id *ID) UnmarshalText(b []byte) error {
	v, err := ParseID(string(b))
	if err == nil {
		*id = v
	}
	return err
}

// Int64Value gives pgx the same 64 bits as a bigint.
func (id ID) Int64Value() (pgtype.Int8, error) {
	return pgtype.Int8{Int64: int64(id), Valid: true}, nil
}

// ScanInt64 takes the same 64 bits back.
func (id *ID) ScanInt64(v pgtype.Int8) error {
	if !v.Valid {
		return fmt.Errorf("base: a null is not an id")
	}
	*id = ID(v.Int64)
	return nil
}

// clip shortens a value for a message.
func clip(s string) string {
	const most = 60
	if len(s) <= most {
		return s
	}
	return s[:most] + "…"
}
