package unit

import (
	"fmt"
	"math"
	"strconv"
)

// e24 returns the series of IEC 60063:2015, table 1 (values from memory); they differ from rounded powers from 2.7 to 4.7 and at 8.2, where
// history wanted it. E6 and E12 are every fourth and every second of it.
func e24() []float64 {
	return []float64{
		1.0, 1.1, 1.2, 1.3, 1.5, 1.6, 1.8, 2.0, 2.2, 2.4, 2.7, 3.0, 3.3, 3.6, 3.9, 4.3, 4.7, 5.1, 5.6, 6.2, 6.8, 7.5, 8.2, 9.1,
	}
}

// The one value of E192 that is not the rounded power, 9.19: IEC 60063:2015, table 2 (value from memory).
const exceptionIndex, exceptionValue = 185, 9.20

// Series returns the values of one decade, from 1 to below 10, of E6, E12, E24, E48, E96 or E192.
func Series(n int) ([]float64, error) {
	switch n {
	case 6, 12, 24:
		var v []float64
		for i := 0; i < 24; i += 24 / n {
			v = append(v, e24()[i])
		}
		return v, nil
	case 48, 96, 192:
		var v []float64
		for i := 0; i < 192; i += 192 / n {
			x := math.Round(100*math.Pow(10, float64(i)/192)) / 100
			if i == exceptionIndex {
				x = exceptionValue
			}
			v = append(v, x)
		}
		return v, nil
	}
	return nil, fmt.Errorf("there is no series E%d", n)
}

// Preferred returns the value of a series nearest to x in ratio. x must be positive and finite.
func Preferred(series int, x float64) (float64, error) {
	values, err := Series(series)
	if err != nil {
		return math.NaN(), err
	}
	if !(x > 0) || math.IsInf(x, 1) {
		return math.NaN(), fmt.Errorf("a preferred value needs a positive number")
	}
	decade := math.Floor(math.Log10(x))
	best, distance := math.NaN(), math.Inf(1)
	for shift := -1.0; shift <= 1; shift++ {
		for _, v := range values {
			c := tenfold(v, int(decade+shift))
			if d := math.Abs(math.Log(c / x)); d < distance {
				best, distance = c, d
			}
		}
	}
	return best, nil
}

// tenfold returns v 10^e rounded once, not the product of two rounded numbers.
func tenfold(v float64, e int) float64 {
	x, err := decimal(strconv.FormatFloat(v, 'f', -1, 64), "", e)
	if err != nil {
		return v * math.Pow(10, float64(e))
	}
	return x
}
