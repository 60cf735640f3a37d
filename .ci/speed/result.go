package main

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
)

// result is what a row came to.
type result struct {
	row
	value  float64   // the median
	ratios []float64 // of the rounds, sorted
	err    error
}

// measure takes rounds of the row's figure in turn with its reference.
func (r row) measure(b *bench, rounds int, kernel string) result {
	if r.kernel != "" && r.kernel != kernel {
		r.bound, r.aim = 0, 0
	}
	if r.rounds > 0 {
		rounds = min(rounds, r.rounds)
	}
	of := result{row: r}
	var values []float64
	for range rounds {
		value, reference, err := r.round(b)
		if err != nil {
			of.err = err
			return of
		}
		values, of.ratios = append(values, value), append(of.ratios, value/reference)
	}
	slices.Sort(of.ratios)
	of.value = median(values)
	return of
}

func (r row) round(b *bench) (value, reference float64, err error) {
	reference = 1
	if r.reference != nil {
		if reference, err = r.reference.measure(b); err != nil {
			return 0, 0, err
		}
	}
	value, err = r.of.measure(b)
	return value, reference, err
}

func (r result) ratio() float64 { return median(r.ratios) }

// holds tells whether the row was measured and its bound, if there is one, holds. What is no
// number does not.
func (r result) holds() bool {
	return r.err == nil && (r.bound == 0 || r.ratio() <= r.bound)
}

// line is the row of the table.
func (r result) line() string {
	if r.err != nil {
		return r.name + "\tnot measured\t\t\t" + limit(r.bound) + "\t" + limit(r.aim) + "\tno\t"
	}
	ratio, spread := "", ""
	if r.reference != nil {
		ratio = number(r.ratio())
	}
	if n := len(r.ratios); n > 1 {
		spread = number(r.ratios[n/4]) + " to " + number(r.ratios[n*3/4])
	}
	return fmt.Sprintf("%s\t%s %s\t%s\t%s\t%s\t%s\t%s\t", r.name, number(r.value), r.of.unit(), ratio, spread,
		limit(r.bound), limit(r.aim), r.verdict())
}

func (r result) verdict() string {
	switch {
	case !r.holds():
		return "no"
	case r.aim > 0 && r.ratio() > r.aim:
		if r.bound == 0 {
			return "short of the aim"
		}
		return "yes, short of the aim"
	case r.bound > 0:
		return "yes"
	}
	return ""
}

// complaint says why the row does not hold.
func (r result) complaint() string {
	if r.err != nil {
		return fmt.Sprintf("does not hold: %s: not measured: %s", r.name, strings.TrimSpace(r.err.Error()))
	}
	return fmt.Sprintf("does not hold: %s: %s, allowed %s", r.name, number(r.ratio()), number(r.bound))
}

// limit is a bound or an aim, where there is one.
func limit(x float64) string {
	if x == 0 {
		return ""
	}
	return number(x)
}

// number gives three digits, and all of them that stand before the point.
func number(x float64) string {
	if x >= 1000 {
		return strconv.FormatFloat(x, 'f', 0, 64)
	}
	return strconv.FormatFloat(x, 'g', 3, 64)
}
