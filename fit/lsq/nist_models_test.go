package lsq

import "math"

// nistModel is one regression function of the reference datasets: its value at
// b for observation i, and its derivatives by b in g.
type nistModel func(b []float64, x [][]float64, i int, g []float64) float64

// one turns a function of one regressor into a nistModel.
func one(f func(b []float64, x float64, g []float64) float64) nistModel {
	return func(b []float64, x [][]float64, i int, g []float64) float64 { return f(b, x[0][i], g) }
}

// nistModels are the 27 functions as the data files print them, with
// derivatives worked out by hand (TestNISTDerivatives holds them against
// differences).
var nistModels = map[string]nistModel{
	"bennett5": one(func(b []float64, x float64, g []float64) float64 {
		v := math.Pow(b[1]+x, -1/b[2])
		y := b[0] * v
		g[0] = v
		g[1] = -y / (b[2] * (b[1] + x))
		g[2] = y * math.Log(b[1]+x) / (b[2] * b[2])
		return y
	}),
	"boxbod":   one(rise),
	"misra1a":  one(rise),
	"chwirut1": one(chwirut),
	"chwirut2": one(chwirut),
	"danwood": one(func(b []float64, x float64, g []float64) float64 {
		g[0] = math.Pow(x, b[1])
		g[1] = b[0] * g[0] * math.Log(x)
		return b[0] * g[0]
	}),
	"eckerle4": one(func(b []float64, x float64, g []float64) float64 {
		z := (x - b[2]) / b[1]
		e := math.Exp(-z*z/2) / b[1]
		y := b[0] * e
		g[0] = e
		g[1] = y * (z*z - 1) / b[1]
		g[2] = y * z / b[1]
		return y
	}),
	"enso":   one(enso),
	"gauss1": one(gauss),
	"gauss2": one(gauss),
	"gauss3": one(gauss),
	"hahn1": one(func(b []float64, x float64, g []float64) float64 {
		return rational(b, x, g, 4)
	}),
	"thurber": one(func(b []float64, x float64, g []float64) float64 {
		return rational(b, x, g, 4)
	}),
	"kirby2": one(func(b []float64, x float64, g []float64) float64 {
		return rational(b, x, g, 3)
	}),
	"lanczos1": one(lanczos),
	"lanczos2": one(lanczos),
	"lanczos3": one(lanczos),
	"mgh09": one(func(b []float64, x float64, g []float64) float64 {
		n, d := x*x+x*b[1], x*x+x*b[2]+b[3]
		y := b[0] * n / d
		g[0] = n / d
		g[1] = b[0] * x / d
		g[2] = -y * x / d
		g[3] = -y / d
		return y
	}),
	"mgh10": one(func(b []float64, x float64, g []float64) float64 {
		s := x + b[2]
		e := math.Exp(b[1] / s)
		y := b[0] * e
		g[0] = e
		g[1] = y / s
		g[2] = -y * b[1] / (s * s)
		return y
	}),
	"mgh17": one(func(b []float64, x float64, g []float64) float64 {
		e, f := math.Exp(-x*b[3]), math.Exp(-x*b[4])
		g[0] = 1
		g[1] = e
		g[2] = f
		g[3] = -b[1] * x * e
		g[4] = -b[2] * x * f
		return b[0] + b[1]*e + b[2]*f
	}),
	"misra1b": one(func(b []float64, x float64, g []float64) float64 {
		q := 1 + b[1]*x/2
		g[0] = 1 - 1/(q*q)
		g[1] = b[0] * x / (q * q * q)
		return b[0] * g[0]
	}),
	"misra1c": one(func(b []float64, x float64, g []float64) float64 {
		q := 1 + 2*b[1]*x
		g[0] = 1 - 1/math.Sqrt(q)
		g[1] = b[0] * x / (q * math.Sqrt(q))
		return b[0] * g[0]
	}),
	"misra1d": one(func(b []float64, x float64, g []float64) float64 {
		q := 1 + b[1]*x
		g[0] = b[1] * x / q
		g[1] = b[0] * x / (q * q)
		return b[0] * g[0]
	}),
	"nelson": func(b []float64, x [][]float64, i int, g []float64) float64 {
		e := x[0][i] * math.Exp(-b[2]*x[1][i])
		g[0] = 1
		g[1] = -e
		g[2] = b[1] * x[1][i] * e
		return b[0] - b[1]*e
	},
	"rat42": one(func(b []float64, x float64, g []float64) float64 {
		e := math.Exp(b[1] - b[2]*x)
		q := 1 + e
		g[0] = 1 / q
		g[1] = -b[0] / q * (e / q)
		g[2] = -x * g[1]
		return b[0] / q
	}),
	"rat43": one(func(b []float64, x float64, g []float64) float64 {
		e := math.Exp(b[1] - b[2]*x)
		q := 1 + e
		v := math.Pow(q, -1/b[3])
		y := b[0] * v
		g[0] = v
		g[1] = -y / b[3] * (e / q)
		g[2] = -x * g[1]
		g[3] = y * math.Log(q) / (b[3] * b[3])
		return y
	}),
	"roszman1": one(func(b []float64, x float64, g []float64) float64 {
		w := x - b[3]
		z := b[2] / w
		q := math.Pi * (1 + z*z)
		g[0] = 1
		g[1] = -x
		g[2] = -1 / (w * q)
		g[3] = -z / (w * q)
		return b[0] - b[1]*x - math.Atan(z)/math.Pi
	}),
}

// rise is b1 (1 - exp(-b2 x)).
func rise(b []float64, x float64, g []float64) float64 {
	e := math.Exp(-b[1] * x)
	g[0] = -math.Expm1(-b[1] * x)
	g[1] = b[0] * x * e
	return b[0] * g[0]
}

// chwirut is exp(-b1 x)/(b2 + b3 x).
func chwirut(b []float64, x float64, g []float64) float64 {
	d := b[1] + b[2]*x
	y := math.Exp(-b[0]*x) / d
	g[0] = -x * y
	g[1] = -y / d
	g[2] = -x * y / d
	return y
}

// enso is a mean and three cycles, one of them of a year.
func enso(b []float64, x float64, g []float64) float64 {
	g[0] = 1
	y := b[0]
	for _, c := range [3][3]int{{1, 2, -1}, {4, 5, 3}, {7, 8, 6}} {
		period := 12.0
		if c[2] >= 0 {
			period = b[c[2]]
		}
		a := 2 * math.Pi * x / period
		sin, cos := math.Sincos(a)
		g[c[0]], g[c[1]] = cos, sin
		y += b[c[0]]*cos + b[c[1]]*sin
		if c[2] >= 0 {
			g[c[2]] = (b[c[0]]*sin - b[c[1]]*cos) * a / period
		}
	}
	return y
}

// gauss is an exponential and two bells.
func gauss(b []float64, x float64, g []float64) float64 {
	g[0] = math.Exp(-b[1] * x)
	g[1] = -b[0] * x * g[0]
	y := b[0] * g[0]
	for _, k := range [2]int{2, 5} {
		z := (x - b[k+1]) / b[k+2]
		e := math.Exp(-z * z)
		g[k] = e
		g[k+1] = 2 * b[k] * e * z / b[k+2]
		g[k+2] = 2 * b[k] * e * z * z / b[k+2]
		y += b[k] * e
	}
	return y
}

// lanczos is three exponentials.
func lanczos(b []float64, x float64, g []float64) float64 {
	y := 0.0
	for k := 0; k < 6; k += 2 {
		e := math.Exp(-b[k+1] * x)
		g[k] = e
		g[k+1] = -b[k] * x * e
		y += b[k] * e
	}
	return y
}

// rational is a polynomial of n terms over one that begins with 1.
func rational(b []float64, x float64, g []float64, n int) float64 {
	num, den, p := 0.0, 1.0, 1.0
	for k := range n {
		num += b[k] * p
		g[k] = p
		p *= x
	}
	p = x
	for k := n; k < len(b); k++ {
		den += b[k] * p
		g[k] = p
		p *= x
	}
	y := num / den
	for k := range b {
		if k < n {
			g[k] /= den
		} else {
			g[k] *= -y / den
		}
	}
	return y
}
