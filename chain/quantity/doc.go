// Package quantity reads and prints values as the trade writes them: "4k7", "100n", "-42dBV/Pa", "0.5V/us".
//
// Every value is in SI units once read: Ω, F, V, Pa, V/Pa, Hz, s, A, V/s, V/√Hz, A/√Hz, K; ratios are plain numbers
// and decibels stay decibels. Letter codes for resistance and capacitance are those of IEC 60062:2016, where the
// multiplier's letter stands for the decimal point.
package quantity
