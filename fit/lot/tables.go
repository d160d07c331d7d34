package lot

var splitTable = []sizeRow{{4, [6]float64{1e9, 1e9, 1e9, 1e9, 1e9, 1e9}}, {10, [6]float64{1e9, 1e9, 1e9, 1e9, 1e9, 1e9}}}
var limitTable = []sizeRow{{8, [6]float64{6, 6, 6, 6, 6, 6}}, {100, [6]float64{6, 6, 6, 6, 6, 6}}}
