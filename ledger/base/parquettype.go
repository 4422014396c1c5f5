package base

import (
	"math"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/deprecated"
	"github.com/parquet-go/parquet-go/format"
)

// readerOf chooses how the values of a type are read into a column.
func readerOf(col *column, typ parquet.Type) (read func(parquet.Value, *cell) string, reason string) {
	switch kind, plain := typ.Kind(), plainType(typ); {
	case (kind == parquet.Int64 || kind == parquet.Int32) && plain:
		if col.kind == someText {
			break
		}
		unsigned, narrow := isUnsigned(typ), kind == parquet.Int32
		return func(v parquet.Value, c *cell) string {
			bits := v.Uint64()
			switch {
			case narrow && unsigned:
				bits = uint64(v.Uint32())
			case narrow:
				bits = uint64(int64(v.Int32()))
			}
			return wholeCell(col, bits, unsigned, c)
		}, ""
	case (kind == parquet.Double || kind == parquet.Float) && plain:
		if col.kind == anID {
			return nil, "is a column of floating-point numbers, which lose digits of ids: write it as UINT_64"
		}
		if col.kind != aNumber {
			break
		}
		return func(v parquet.Value, c *cell) string {
			x := v.Double()
			if kind == parquet.Float {
				x = float64(v.Float())
			}
			if math.IsNaN(x) || math.IsInf(x, 0) {
				return reasonInfinite
			}
			c.given, c.number = true, x
			return ""
		}, ""
	case kind == parquet.ByteArray && plain:
		return func(v parquet.Value, c *cell) string { return parseCell(col, v.ByteArray(), c) }, ""
	}
	return nil, "has the type " + typ.String() + ", which does not suit it"
}

// wholeCell takes in a whole number, whose bits are those of a uint64 or an int64.
func wholeCell(col *column, bits uint64, unsigned bool, c *cell) string {
	negative := !unsigned && int64(bits) < 0
	c.given = true
	switch col.kind {
	case anID:
		if negative {
			return "is below 0: a signed column cannot hold ids from 2^63 on, write it as UINT_64"
		}
		c.id = ID(bits)
	case aCount:
		if !negative && int64(bits) < 0 {
			return reasonCount
		}
		c.count = int64(bits)
	default:
		c.number = float64(int64(bits))
		if unsigned {
			c.number = float64(bits)
		}
	}
	return ""
}

// plainType is false for values that mean something else than they are: dates, decimals and the like.
func plainType(typ parquet.Type) bool {
	if l := typ.LogicalType(); l != nil && l.Value != nil {
		switch l.Value.(type) {
		case *format.IntType, *format.StringType, *format.EnumType:
		default:
			return false
		}
	}
	return true
}

func isUnsigned(typ parquet.Type) bool {
	if l := typ.LogicalType(); l != nil && l.Value != nil {
		i, ok := l.Value.(*format.IntType)
		return ok && !i.IsSigned
	}
	if c := typ.ConvertedType(); c != nil {
		return *c == deprecated.Uint64 || *c == deprecated.Uint32 || *c == deprecated.Uint16 || *c == deprecated.Uint8
	}
	return false
}
