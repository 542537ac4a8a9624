package report

import (
	"encoding/csv"
	"io"
	"math"
	"strconv"
	"strings"
)

// bought is how many of one kind of part to buy.
type bought struct {
	What  string
	Count int
}

// purchase adds up the parts by value and series, in the order in which they first come.
func purchase(list []Part) []bought {
	var total []bought
	at := map[string]int{}
	for _, p := range list {
		what := partValue(p)
		switch p.Unit {
		case Piece:
			what = "amplifier, " + clean(p.Series)
		default:
			what += ", " + clean(p.Series)
		}
		i, known := at[what]
		if !known {
			i = len(total)
			at[what] = i
			total = append(total, bought{What: what})
		}
		total[i].Count++
	}
	return total
}

// partValue returns a part's value as the trade prints it: "4.7 kΩ", "100 nF"; "–" for an amplifier.
func partValue(p Part) string {
	return people(p.Value, func(x float64) string {
		unit := "Ω"
		if p.Unit == Farad {
			unit = "F"
		}
		prefixes := []struct {
			size float64
			name string
		}{{1e9, "G"}, {1e6, "M"}, {1e3, "k"}, {1, ""}, {1e-3, "m"}, {1e-6, "µ"}, {1e-9, "n"}, {1e-12, "p"}}
		if p.Unit == Farad {
			prefixes = append(prefixes[3:4:4], prefixes[5:]...) // the trade writes 4700 µF, not 4.7 mF
		}
		const rounding = 1e-9 // of a value, that its binary form may be off by
		for _, s := range prefixes {
			if math.Abs(x) >= s.size*(1-rounding) {
				return trimmed(significant(x/s.size, 5)) + " " + s.name + unit
			}
		}
		last := prefixes[len(prefixes)-1]
		return trimmed(significant(x/last.size, 5)) + " " + last.name + unit
	})
}

// plusMinus returns a tolerance.
func plusMinus(n Number) string {
	return people(n, func(x float64) string { return "±" + trimmed(significant(x*100, 3)) + " %" })
}

// WritePartsCSV writes the parts list as CSV (RFC 4180), values in ohms and farads. Where a text would be taken for a
// formula by a spreadsheet it begins with an apostrophe. It returns the error of w.
func WritePartsCSV(w io.Writer, list []Part) error {
	c := csv.NewWriter(w)
	c.UseCRLF = true
	rows := [][]string{{"reference", "value", "unit", "tolerance", "series", "stage", "role", "key"}}
	for _, p := range list {
		number := func(n Number) string {
			x, there := n.Value()
			if !there {
				return ""
			}
			return strconv.FormatFloat(x, 'g', -1, 64)
		}
		rows = append(rows, []string{plainCell(p.Ref), number(p.Value), p.Unit, number(p.Tolerance), plainCell(p.Series), plainCell(p.Stage), p.Role, p.Key})
	}
	return c.WriteAll(rows)
}

// plainCell returns a text that no spreadsheet takes for a formula.
func plainCell(s string) string {
	s = clean(s)
	if s != "" && strings.ContainsRune("=+-@", rune(s[0])) {
		return "'" + s
	}
	return s
}
