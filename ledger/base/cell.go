package base

import (
	"bytes"
	"errors"
	"math"
	"strconv"
	"unicode/utf8"
)

const (
	reasonEmpty    = "is empty"
	reasonID       = "is not an id: write a whole number from 0 to 18446744073709551615, digits only"
	reasonFloatID  = "is not an id: it went through a floating-point number, which loses digits"
	reasonCount    = "is not a whole number below 2^63"
	reasonNumber   = "is not a number"
	reasonInfinite = "is not a finite number"
	reasonText     = "is not UTF-8 text of at most 100 bytes"
)

// longestText bounds a text cell.
const longestText = 100

// parseCell reads one value; a reason when it cannot.
func parseCell(c *column, b []byte, into *cell) (reason string) {
	if len(b) == 0 {
		if c.optional {
			return ""
		}
		return reasonEmpty
	}
	into.given = true
	switch c.kind {
	case anID:
		return parseIDCell(b, &into.id)
	case aCount:
		n, err := strconv.ParseInt(string(b), 10, 64)
		if err != nil || b[0] == '+' {
			return reasonCount
		}
		into.count = n
	case aNumber:
		return parseNumber(b, &into.number)
	case someText:
		if into.text = string(b); len(b) > longestText || !utf8.Valid(b) || bytes.IndexByte(b, 0) >= 0 {
			return reasonText
		}
	}
	return ""
}

// parseIDCell is ParseID without the copy.
func parseIDCell(b []byte, into *ID) (reason string) {
	if n, digits := decimal(b); digits == len(b) && (digits == 1 || b[0] != '0') {
		*into = ID(n)
		return ""
	}
	id, err := ParseID(string(b))
	if err != nil {
		if _, err := strconv.ParseFloat(string(b), 64); err == nil && bytes.ContainsAny(b, ".eE") {
			return reasonFloatID
		}
		return reasonID
	}
	*into = id
	return ""
}

// decimal reads up to 19 leading digits, which always fit.
func decimal(b []byte) (n uint64, digits int) {
	for digits < len(b) && digits < 19 && '0' <= b[digits] && b[digits] <= '9' {
		n = n*10 + uint64(b[digits]-'0')
		digits++
	}
	return n, digits
}

// tens are the powers of ten that a double holds exactly and a short fraction needs.
var tens = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

func parseNumber(b []byte, into *float64) (reason string) {
	// Digits, a dot, digits, 15 at most: both the digits as a whole number and the power of ten are exact, so one division
	// rounds correctly (Clinger 1990).
	if n, whole := decimal(b); whole > 0 && whole <= 15 {
		if whole == len(b) {
			*into = float64(n)
			return ""
		}
		if b[whole] == '.' {
			fraction, digits := decimal(b[whole+1:])
			if digits > 0 && whole+digits <= 15 && whole+1+digits == len(b) {
				*into = (float64(n)*tens[digits] + float64(fraction)) / tens[digits]
				return ""
			}
		}
	}
	x, err := strconv.ParseFloat(string(b), 64)
	switch {
	case errors.Is(err, strconv.ErrRange) || err == nil && (math.IsNaN(x) || math.IsInf(x, 0)):
		return reasonInfinite
	case err != nil || bytes.ContainsAny(b, "xXpP_"):
		return reasonNumber
	}
	*into = x
	return ""
}
