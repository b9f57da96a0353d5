package compare

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strings"

	"modelmend/fit/dataset"
	"modelmend/fit/equation"
)

// grouping numbers the values of a column over the rows used, from 0.
type grouping struct {
	Column string
	Of     []int32
	Count  int
	Value  []float64 // of periods, by row; NaN where time is text
}

// keyColumn finds a column that a key of the study names; every row used must have a value there.
func (c *Comparison) keyColumn(key, name string) (*dataset.Column, error) {
	col, ok := c.Table.Column(name)
	if !ok {
		advice := ""
		if near := equation.Nearest(name, c.Table.Names()); len(near) > 0 {
			advice = "did you mean " + strings.Join(near, " or ") + "?"
		}
		return nil, &StudyError{key, fmt.Sprintf("%s has no column %q", c.Table.Name, name), advice}
	}
	for _, row := range c.Design.Index {
		if col.IsMissing(row) {
			return nil, &StudyError{key, fmt.Sprintf("column %q misses a value in line %d", name, c.Table.Lines[row]),
				"fill it in, or leave the row out with rows"}
		}
	}
	return col, nil
}

// labels gives the values of a fold column as text, for the rows used.
func (c *Comparison) labels(column string) ([]string, error) {
	col, err := c.keyColumn("folds", column)
	if err != nil {
		return nil, err
	}
	return c.texts(col), nil
}

func (c *Comparison) texts(col *dataset.Column) []string {
	out := make([]string, len(c.Design.Index))
	for i, row := range c.Design.Index {
		if col.Kind == dataset.Text {
			out[i] = col.Levels[col.Codes[row]]
		} else {
			out[i] = col.Value(row).String()
		}
	}
	return out
}

// clusters numbers the clusters of a column in order of first appearance.
func (c *Comparison) clusters(column string) (*grouping, error) {
	col, err := c.keyColumn("clusters", column)
	if err != nil {
		return nil, err
	}
	g := &grouping{Column: column}
	seen := map[string]int32{}
	for _, l := range c.texts(col) {
		k, ok := seen[l]
		if !ok {
			k = int32(len(seen))
			seen[l] = k
		}
		g.Of = append(g.Of, k)
	}
	g.Count = len(seen)
	if g.Count < 2 {
		return nil, &StudyError{"clusters", fmt.Sprintf("column %q has the same value in every row used", column), "name a column that tells clusters apart"}
	}
	return g, nil
}

// isoDate is a text whose byte order is time order.
var isoDate = regexp.MustCompile(`^\d{4}(-\d{2}(-\d{2}([T ]\d{2}(:\d{2}(:\d{2}(\.\d+)?)?)?Z?)?)?|-?Q[1-4]|-?W\d{2})?$`)

// periods numbers the periods of the time column in time order: numbers by size, text where it is in ISO form.
func (c *Comparison) periods(column string) (*grouping, error) {
	col, err := c.keyColumn("time", column)
	if err != nil {
		return nil, err
	}
	g := &grouping{Column: column, Of: make([]int32, len(c.Design.Index)), Value: make([]float64, len(c.Design.Index))}
	for i, row := range c.Design.Index {
		g.Value[i] = col.Value(row).Float()
	}
	if col.Kind == dataset.Number {
		values := make([]float64, 0, len(c.Design.Index))
		for _, row := range c.Design.Index {
			values = append(values, col.Hi[row])
		}
		slices.Sort(values)
		values = slices.Compact(values)
		for i, row := range c.Design.Index {
			k, _ := slices.BinarySearch(values, col.Hi[row])
			g.Of[i] = int32(k)
		}
		g.Count = len(values)
	} else {
		used := map[int32]bool{}
		for _, row := range c.Design.Index {
			used[col.Codes[row]] = true
			if l := col.Levels[col.Codes[row]]; !isoDate.MatchString(l) {
				return nil, &StudyError{"time", fmt.Sprintf("column %q holds %q in line %d, which is no number and no date in ISO form", column, l, c.Table.Lines[row]),
					"write dates as 2001-03-31, months as 2001-03, quarters as 2001-Q1"}
			}
		}
		var codes []int32 // levels stand in byte order
		for k := range used {
			codes = append(codes, k)
		}
		slices.Sort(codes)
		for i, row := range c.Design.Index {
			k, _ := slices.BinarySearch(codes, col.Codes[row])
			g.Of[i] = int32(k)
		}
		g.Count = len(codes)
	}
	if g.Count < 2 {
		return nil, &StudyError{"time", fmt.Sprintf("column %q has the same value in every row used", column), "name the column that orders the rows"}
	}
	return g, nil
}

// resolveKeys numbers clusters and periods where the study declares them.
func (c *Comparison) resolveKeys() error {
	if len(c.Study.Clusters) > 2 {
		return &StudyError{"clusters", fmt.Sprintf("%d columns were named", len(c.Study.Clusters)), "name one, or two for two-way clusters"}
	}
	for i, name := range c.Study.Clusters {
		if i == 1 && name == c.Study.Clusters[0] {
			return &StudyError{"clusters", fmt.Sprintf("column %q is named twice", name), "name another column"}
		}
		g, err := c.clusters(name)
		if err != nil {
			return err
		}
		c.Clusters = append(c.Clusters, g)
	}
	if c.Study.Time != "" {
		g, err := c.periods(c.Study.Time)
		if err != nil {
			return err
		}
		c.Periods = g
	}
	return nil
}

// blockLength is the length of the blocks that are drawn from so many periods: the cube root, rounded up.
//
// The order n^(1/3) is that of Künsch (1989), Annals of Statistics 17(3), 1217-1241, for the variance of a mean; the constant 1 is common practice,
// no source.
func blockLength(periods int) int { return max(1, int(math.Ceil(math.Cbrt(float64(periods))-1e-9))) }
