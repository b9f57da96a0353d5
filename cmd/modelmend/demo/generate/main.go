// Command generate writes flats.csv, the table of the built-in study. Every figure in it is invented: the town, its districts and
// its flats do not exist. The truth that the rents follow is written in TRUTH.md beside it and held here.
//
//	go run ./cmd/modelmend/demo/generate > cmd/modelmend/demo/flats.csv
package main

import (
	"bufio"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
)

// truth holds the coefficients of ln(rent).
var truth = struct {
	constant, heat, glazing, area, area2, walk, areaWalk, shops, stops float64
	district                                                           map[string]float64
	noise                                                              float64
}{
	constant: 5.55,
	heat:     0.030,    // heating standard, points: the coefficient of interest
	glazing:  0.015,    // glazing standard, points: the same concept, inspected otherwise
	area:     0.0205,   // square metres
	area2:    -0.00006, // its square
	walk:     -0.004,   // minutes on foot to the ferry
	areaWalk: -0.00012,
	shops:    0.0, // shops within ten minutes: no effect
	stops:    0.0, // tram stops within ten minutes: no effect, and nearly a copy of shops
	district: map[string]float64{"Harbour": 0, "Hillside": 0.06, "Meadows": -0.05, "Old Mill": 0.10, "Quarry": -0.12},
	noise:    0.17,
}

func main() {
	w := bufio.NewWriter(os.Stdout)
	defer w.Flush()
	rng := rand.New(rand.NewPCG(20260101, 42))
	fmt.Fprintln(w, "flat,rent,heating,glazing,area,walk,shops,stops,district")
	markers := []string{"", "NA", "n/a", "."}
	for i := range 480 {
		district := pick(rng)
		// Heating and glazing are two inspections of one thing, how well the flat was refitted.
		refit := 5 + 1.8*rng.NormFloat64()
		heating := round(clamp(refit+0.31*rng.NormFloat64(), 0, 12), 1)
		glazing := round(clamp(0.9*refit+0.8+0.28*rng.NormFloat64(), 0, 12), 1)
		area := round(clamp(62+19*rng.NormFloat64(), 22, 130), 0)
		walk := round(clamp(18+7*rng.NormFloat64(), 2, 45), 0)
		// Shops and stops follow how busy the street is, whatever the flat is like.
		busy := math.Exp(2.2 + 0.5*rng.NormFloat64())
		shops := round(clamp(2*busy+0.9*rng.NormFloat64(), 0, 200), 0)
		stops := round(clamp(busy+0.7*rng.NormFloat64(), 0, 100), 0)
		ln := truth.constant + truth.heat*heating + truth.glazing*glazing + truth.area*area + truth.area2*area*area +
			truth.walk*walk + truth.areaWalk*area*walk + truth.shops*shops + truth.stops*stops + truth.district[district] + truth.noise*rng.NormFloat64()
		cells := []string{
			fmt.Sprintf("F%03d", i+1), fmt.Sprintf("%.0f", math.Exp(ln)), fmt.Sprintf("%.1f", heating), fmt.Sprintf("%.1f", glazing),
			fmt.Sprintf("%.0f", area), fmt.Sprintf("%.0f", walk), fmt.Sprintf("%.0f", shops), fmt.Sprintf("%.0f", stops), district,
		}
		if rng.Float64() < 0.025 { // a cell that nobody filled in
			cells[2+rng.IntN(6)] = markers[rng.IntN(len(markers))]
		}
		for j, c := range cells {
			if j > 0 {
				fmt.Fprint(w, ",")
			}
			fmt.Fprint(w, c)
		}
		fmt.Fprintln(w)
	}
}

func pick(rng *rand.Rand) string {
	u := rng.Float64()
	switch {
	case u < 0.30:
		return "Harbour"
	case u < 0.56:
		return "Hillside"
	case u < 0.80:
		return "Meadows"
	case u < 0.95:
		return "Old Mill"
	}
	return "Quarry"
}

func clamp(v, lo, hi float64) float64 { return math.Min(hi, math.Max(lo, v)) }

func round(v float64, digits int) float64 {
	f := math.Pow10(digits)
	return math.Round(v*f) / f
}
