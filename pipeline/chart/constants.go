package chart

import "math"

// Constants are the factors of control charts for subgroups of N normal values
// (ISO 7870-2; computed, not tabulated).
type Constants struct {
	N          int
	C4         float64 // mean of s over sigma
	D2, D3     float64 // mean and standard deviation of the range over sigma
	A2, A3     float64 // limits of the mean from the mean range and the mean s
	B3, B4     float64 // limits of s from its mean
	LowD, TopD float64 // limits of the range from its mean (D3 and D4 of the tables)
	E2         float64 // limits of individuals from the mean range
}

// ConstantsFor computes the factors for subgroups of n >= 2 values.
func ConstantsFor(n int) Constants {
	f := float64(n)
	a, _ := math.Lgamma(f / 2)
	b, _ := math.Lgamma((f - 1) / 2)
	c := Constants{N: n, C4: math.Sqrt(2/(f-1)) * math.Exp(a-b)}
	// Distribution of the range W: P(W <= w) = n int phi(x) (Phi(x+w)-Phi(x))^(n-1) dx;
	// E W and E W^2 from its tail.
	xs, wx := legendre(120, -9, 9)
	ws, ww := legendre(120, 0, 14)
	var second float64
	for i, w := range ws {
		p := 0.0
		for j, x := range xs {
			p += wx[j] * f * density(x) * math.Pow(between(x, x+w), f-1)
		}
		c.D2 += ww[i] * (1 - p)
		second += ww[i] * 2 * w * (1 - p)
	}
	c.D3 = math.Sqrt(second - c.D2*c.D2)
	c.A2, c.A3 = 3/(c.D2*math.Sqrt(f)), 3/(c.C4*math.Sqrt(f))
	half := 3 * math.Sqrt(1-c.C4*c.C4) / c.C4
	c.B3, c.B4 = max(0, 1-half), 1+half
	c.LowD, c.TopD = max(0, 1-3*c.D3/c.D2), 1+3*c.D3/c.D2
	c.E2 = 3 / c.D2
	return c
}
