// Made by TestLongSplitTable with GATESILL_LONG=write; do not edit.

package lot

// splitTable holds the bar of the parting: number of devices, and for 1 to 6
// quantities the score that 0.4 % of normal lots and 0.8 % of lots spread evenly or
// with the tails of t5 exceed at most.
var splitTable = []sizeRow{
	{8, [mostQuantities]float64{16.00, 18.25, 19.54, 20.44, 21.16, 21.72}},
	{9, [mostQuantities]float64{16.03, 18.15, 19.31, 20.26, 20.96, 21.47}},
	{10, [mostQuantities]float64{16.14, 18.25, 19.44, 20.30, 20.89, 21.35}},
	{11, [mostQuantities]float64{16.32, 18.30, 19.58, 20.47, 21.09, 21.77}},
	{12, [mostQuantities]float64{16.40, 18.43, 19.65, 20.47, 21.05, 21.52}},
	{13, [mostQuantities]float64{16.62, 18.70, 19.87, 20.71, 21.31, 21.83}},
	{14, [mostQuantities]float64{16.83, 18.87, 20.13, 20.98, 21.72, 22.19}},
	{15, [mostQuantities]float64{17.02, 19.07, 20.28, 21.11, 21.83, 22.31}},
	{16, [mostQuantities]float64{17.17, 19.18, 20.49, 21.35, 22.02, 22.55}},
	{17, [mostQuantities]float64{17.35, 19.36, 20.58, 21.43, 22.02, 22.54}},
	{18, [mostQuantities]float64{17.53, 19.62, 20.83, 21.65, 22.33, 22.88}},
	{19, [mostQuantities]float64{17.79, 19.85, 21.00, 21.80, 22.45, 22.92}},
	{20, [mostQuantities]float64{18.02, 20.17, 21.43, 22.33, 23.00, 23.62}},
	{22, [mostQuantities]float64{18.32, 20.57, 21.81, 22.68, 23.40, 23.90}},
	{24, [mostQuantities]float64{18.65, 20.99, 22.23, 23.11, 23.84, 24.44}},
	{27, [mostQuantities]float64{19.32, 21.63, 22.94, 23.84, 24.56, 25.17}},
	{30, [mostQuantities]float64{19.73, 22.06, 23.51, 24.46, 25.18, 25.70}},
	{34, [mostQuantities]float64{20.39, 22.93, 24.24, 25.21, 26.08, 26.73}},
	{38, [mostQuantities]float64{20.77, 23.70, 25.14, 26.24, 27.12, 27.73}},
	{42, [mostQuantities]float64{21.27, 24.26, 25.88, 26.99, 27.76, 28.36}},
	{47, [mostQuantities]float64{21.32, 24.72, 26.64, 27.78, 28.57, 29.22}},
	{53, [mostQuantities]float64{22.18, 25.70, 27.52, 28.72, 29.65, 30.37}},
	{60, [mostQuantities]float64{22.88, 26.82, 28.74, 30.03, 31.00, 31.71}},
	{70, [mostQuantities]float64{24.46, 28.48, 30.62, 32.48, 33.61, 34.29}},
	{80, [mostQuantities]float64{25.27, 29.65, 32.01, 33.55, 34.70, 35.38}},
	{90, [mostQuantities]float64{26.44, 31.29, 33.57, 35.31, 36.26, 37.29}},
	{99, [mostQuantities]float64{27.70, 32.37, 34.83, 36.07, 37.31, 38.14}},
	{100, [mostQuantities]float64{28.58, 33.27, 35.35, 36.93, 38.59, 39.79}},
	{115, [mostQuantities]float64{28.34, 33.66, 36.58, 38.15, 39.14, 40.24}},
	{130, [mostQuantities]float64{27.75, 34.17, 37.27, 38.92, 40.51, 41.44}},
	{150, [mostQuantities]float64{25.27, 33.90, 37.64, 39.81, 41.78, 43.22}},
	{200, [mostQuantities]float64{7.20, 27.70, 35.42, 39.63, 43.76, 46.25}},
	{300, [mostQuantities]float64{4.00, 27.88, 38.56, 46.62, 50.57, 53.31}},
	{500, [mostQuantities]float64{4.00, 4.00, 42.09, 59.32, 63.19, 72.22}},
	{1000, [mostQuantities]float64{4.00, 4.00, 4.00, 58.86, 80.26, 92.24}},
	{2000, [mostQuantities]float64{4.00, 4.00, 4.00, 4.00, 4.00, 67.14}},
	{5000, [mostQuantities]float64{4.00, 4.00, 4.00, 4.00, 4.00, 4.00}},
	{20000, [mostQuantities]float64{4.00, 4.00, 4.00, 4.00, 4.00, 4.00}},
}
