package mask

import "math"

var nan = math.NaN()
