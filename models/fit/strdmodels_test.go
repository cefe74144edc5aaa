package fit

import "math"

// strdModel returns the value at x and fills the gradient g with respect to b.
type strdModel func(x, b, g []float64) float64

// strdModels holds the models as the headers of the NIST files write them, with
// analytic gradients; TestStRDGradients checks those by differences.
var strdModels = map[string]strdModel{
	"Bennett5": func(x, b, g []float64) float64 {
		s := b[1] + x[0]
		u := math.Pow(s, -1/b[2])
		g[0] = u
		g[1] = -b[0] / b[2] * u / s
		g[2] = b[0] * u * math.Log(s) / (b[2] * b[2])
		return b[0] * u
	},
	"BoxBOD":   saturating,
	"Misra1a":  saturating,
	"Chwirut1": chwirut,
	"Chwirut2": chwirut,
	"DanWood": func(x, b, g []float64) float64 {
		u := math.Pow(x[0], b[1])
		g[0] = u
		g[1] = b[0] * u * math.Log(x[0])
		return b[0] * u
	},
	"ENSO": func(x, b, g []float64) float64 {
		w := 2 * math.Pi * x[0]
		g[0] = 1
		s, c := math.Sincos(w / 12)
		g[1], g[2] = c, s
		y := b[0] + b[1]*c + b[2]*s
		for _, j := range []int{3, 6} { // period, cosine, sine
			s, c := math.Sincos(w / b[j])
			g[j+1], g[j+2] = c, s
			g[j] = (b[j+1]*s - b[j+2]*c) * w / (b[j] * b[j])
			y += b[j+1]*c + b[j+2]*s
		}
		return y
	},
	"Eckerle4": func(x, b, g []float64) float64 {
		z := (x[0] - b[2]) / b[1]
		e := math.Exp(-0.5 * z * z)
		y := b[0] / b[1] * e
		g[0] = e / b[1]
		g[1] = y / b[1] * (z*z - 1)
		g[2] = y * z / b[1]
		return y
	},
	"Gauss1":   gauss,
	"Gauss2":   gauss,
	"Gauss3":   gauss,
	"Hahn1":    func(x, b, g []float64) float64 { return rational(x[0], b, g, 4) },
	"Thurber":  func(x, b, g []float64) float64 { return rational(x[0], b, g, 4) },
	"Kirby2":   func(x, b, g []float64) float64 { return rational(x[0], b, g, 3) },
	"Lanczos1": lanczos,
	"Lanczos2": lanczos,
	"Lanczos3": lanczos,
	"MGH09": func(x, b, g []float64) float64 {
		num := x[0]*x[0] + x[0]*b[1]
		den := x[0]*x[0] + x[0]*b[2] + b[3]
		g[0] = num / den
		g[1] = b[0] * x[0] / den
		g[2] = -b[0] * num * x[0] / (den * den)
		g[3] = -b[0] * num / (den * den)
		return b[0] * num / den
	},
	"MGH10": func(x, b, g []float64) float64 {
		d := x[0] + b[2]
		e := math.Exp(b[1] / d)
		g[0] = e
		g[1] = b[0] * e / d
		g[2] = -b[0] * e * b[1] / (d * d)
		return b[0] * e
	},
	"MGH17": func(x, b, g []float64) float64 {
		e4, e5 := math.Exp(-x[0]*b[3]), math.Exp(-x[0]*b[4])
		g[0], g[1], g[2] = 1, e4, e5
		g[3] = -b[1] * x[0] * e4
		g[4] = -b[2] * x[0] * e5
		return b[0] + b[1]*e4 + b[2]*e5
	},
	"Misra1b": func(x, b, g []float64) float64 {
		s := 1 + b[1]*x[0]/2
		g[0] = 1 - 1/(s*s)
		g[1] = b[0] * x[0] / (s * s * s)
		return b[0] * g[0]
	},
	"Misra1c": func(x, b, g []float64) float64 {
		s := 1 + 2*b[1]*x[0]
		g[0] = 1 - 1/math.Sqrt(s)
		g[1] = b[0] * x[0] / (s * math.Sqrt(s))
		return b[0] * g[0]
	},
	"Misra1d": func(x, b, g []float64) float64 {
		s := 1 + b[1]*x[0]
		g[0] = b[1] * x[0] / s
		g[1] = b[0] * x[0] / (s * s)
		return b[0] * g[0]
	},
	"Nelson": func(x, b, g []float64) float64 { // ln y
		e := math.Exp(-b[2] * x[1])
		g[0] = 1
		g[1] = -x[0] * e
		g[2] = b[1] * x[0] * x[1] * e
		return b[0] - b[1]*x[0]*e
	},
	"Rat42": func(x, b, g []float64) float64 {
		e := math.Exp(b[1] - b[2]*x[0])
		g[0] = 1 / (1 + e)
		y := b[0] / (1 + e)
		g[1] = -y * e / (1 + e)
		g[2] = y * e / (1 + e) * x[0]
		return y
	},
	"Rat43": func(x, b, g []float64) float64 {
		e := math.Exp(b[1] - b[2]*x[0])
		u := math.Pow(1+e, -1/b[3])
		y := b[0] * u
		g[0] = u
		g[1] = -y * e / (1 + e) / b[3]
		g[2] = -g[1] * x[0]
		g[3] = y * math.Log1p(e) / (b[3] * b[3])
		return y
	},
	"Roszman1": func(x, b, g []float64) float64 {
		d := x[0] - b[3]
		h := math.Pi * (d*d + b[2]*b[2])
		g[0] = 1
		g[1] = -x[0]
		g[2] = -d / h
		g[3] = -b[2] / h
		return b[0] - b[1]*x[0] - math.Atan(b[2]/d)/math.Pi
	},
}

func saturating(x, b, g []float64) float64 {
	e := math.Exp(-b[1] * x[0])
	g[0] = 1 - e
	g[1] = b[0] * x[0] * e
	return b[0] * (1 - e)
}

func chwirut(x, b, g []float64) float64 {
	d := b[1] + b[2]*x[0]
	y := math.Exp(-b[0]*x[0]) / d
	g[0] = -x[0] * y
	g[1] = -y / d
	g[2] = -x[0] * y / d
	return y
}

func gauss(x, b, g []float64) float64 {
	e := math.Exp(-b[1] * x[0])
	g[0], g[1] = e, -b[0]*x[0]*e
	y := b[0] * e
	for _, j := range []int{2, 5} { // height, centre, width
		z := (x[0] - b[j+1]) / b[j+2]
		e := math.Exp(-z * z)
		g[j] = e
		g[j+1] = b[j] * e * 2 * z / b[j+2]
		g[j+2] = b[j] * e * 2 * z * z / b[j+2]
		y += b[j] * e
	}
	return y
}

func lanczos(x, b, g []float64) float64 {
	y := 0.0
	for j := 0; j < 6; j += 2 {
		e := math.Exp(-b[j+1] * x[0])
		g[j], g[j+1] = e, -b[j]*x[0]*e
		y += b[j] * e
	}
	return y
}

// rational is a polynomial of the given number of terms over 1 + b x + ...
func rational(x float64, b, g []float64, terms int) float64 {
	num, den, pow := 0.0, 1.0, 1.0
	for j := range terms {
		num += b[j] * pow
		if j > 0 {
			den += b[terms+j-1] * pow
		}
		pow *= x
	}
	y := num / den
	pow = 1
	for j := range terms {
		g[j] = pow / den
		if j > 0 {
			g[terms+j-1] = -y * pow / den
		}
		pow *= x
	}
	return y
}
