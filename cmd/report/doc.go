// Package report turns the result of a run into what people and programs read: JSON, a summary of
// one terminal screen, and a self-contained HTML page. It computes nothing beyond formatting and
// drawing: every figure comes from the Run and the Pictures that it is given.
//
// Units are those of the field's suffix: hz hertz, v volts, s seconds, db decibels, dbfs decibels
// re a sine whose peaks just reach the ends of the converter's span (AES17). A figure that is not
// there, or that is minus infinity decibels, is null in JSON and "–" for people.
package report
