package sheet

import (
	"math"
	"strconv"
	"strings"
)

// Number reads a cell as a number: digits with at most one decimal mark, a sign, a
// power of ten. ok is false for anything else, also for numbers beyond float64.
func Number(text string, decimal rune) (v float64, ok bool) {
	digits, mark := false, -1
	for i := 0; i < len(text); i++ {
		switch c := text[i]; {
		case c >= '0' && c <= '9':
			digits = true
		case (c == '+' || c == '-') && (i == 0 || text[i-1] == 'e' || text[i-1] == 'E'):
		case rune(c) == decimal && mark < 0:
			mark = i
		case (c == 'e' || c == 'E') && digits:
		default:
			return 0, false
		}
	}
	if !digits {
		return 0, false
	}
	if decimal != '.' && mark >= 0 {
		text = text[:mark] + "." + text[mark+1:]
	}
	v, err := strconv.ParseFloat(text, 64)
	return v, err == nil && !math.IsInf(v, 0)
}

// Hint says how to write a cell that is not a number but was probably meant as one.
func Hint(text string, decimal rune) string {
	other := ','
	if decimal == ',' {
		other = '.'
	}
	if _, ok := Number(text, other); ok {
		return "the decimal mark of this file is " + name(decimal) + "; write it so, or set decimal under [data]"
	}
	stripped := strings.Map(func(r rune) rune {
		switch r {
		case ' ', 0xA0, 0x2009, 0x202F, '\'':
			return -1
		case 0x2212:
			return '-'
		}
		return r
	}, text)
	if stripped != text {
		if _, ok := Number(stripped, decimal); ok {
			return "write " + stripped
		}
	}
	if n := strings.Trim(stripped, "~<>=≈≤≥*()[]?!"); n != stripped {
		if _, ok := Number(n, decimal); ok {
			return "write the number alone, or a missing code; what the sign says belongs in a column of its own"
		}
	}
	if i := strings.IndexFunc(stripped, func(r rune) bool { return (r < '0' || r > '9') && r != decimal && r != '-' && r != '+' }); i > 0 && !strings.ContainsAny(stripped[i:], "0123456789") {
		if _, ok := Number(stripped[:i], decimal); ok {
			return "write " + stripped[:i] + "; units belong in the protocol, remarks in a column of their own"
		}
	}
	return "write a number, or one of the codes of missing under [data]"
}

func name(decimal rune) string {
	if decimal == ',' {
		return "the comma"
	}
	return "the point"
}

// Marks counts how the numbers of some cells are written, to find their decimal mark.
type Marks struct {
	point, comma       int // cells that are numbers only with this mark
	pointSure, commaOK int // of these, such as no thousands could be
}

// Add counts a cell.
func (m *Marks) Add(text string) {
	i := strings.IndexAny(text, ".,")
	if i < 0 {
		return
	}
	mark := rune(text[i])
	if _, ok := Number(text, mark); !ok {
		return
	}
	sure := !thousands(text, i)
	switch {
	case mark == '.':
		m.point++
		if sure {
			m.pointSure++
		}
	default:
		m.comma++
		if sure {
			m.commaOK++
		}
	}
}

// thousands tells whether the mark at i might part thousands: one to three digits, the
// first not 0, before it, and exactly three after it.
func thousands(text string, i int) bool {
	before := strings.TrimLeft(text[:i], "+-")
	return len(before) >= 1 && len(before) <= 3 && before[0] != '0' && len(text)-i-1 == 3 && !strings.ContainsAny(text, "eE")
}

// Decimal gives the decimal mark that the counted cells use, and false where they do
// not tell: both marks are as frequent, or all that stands could be thousands.
func (m *Marks) Decimal(delimiter rune) (mark rune, ok bool) {
	switch {
	case m.point == 0 && m.comma == 0:
		return '.', true
	case m.comma == 0:
		// Between commas or tabs a point has no other reading of any use.
		return '.', m.pointSure > 0 || delimiter != ';'
	case m.point == 0:
		return ',', m.commaOK > 0
	case delimiter == ',':
		return '.', true // a quoted comma among points is a slip
	case m.pointSure > m.commaOK:
		return '.', true
	case m.pointSure < m.commaOK:
		return ',', true
	}
	return '.', false
}
