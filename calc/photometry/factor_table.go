package photometry

// The tables below are defaults that whoever runs the building may replace. Their figures are from memory of the
// lineage of CIE 97:2005 unless a line says otherwise; they are no quotation of it.

// lampFactors is the flux that is left (LLMF) and the share that still burns (LSF) by hours of burning, per kind of
// lamp. From memory; the figures of fluorescent lamps are those of the older edition, which are more cautious for
// tubes on high-frequency gear.
var lampFactors = map[string][]LampFactor{
	"fluorescent_triphosphor":              {{100, 1.0, 1.0}, {500, 0.98, 1.0}, {1000, 0.96, 1.0}, {1500, 0.95, 1.0}, {2000, 0.94, 1.0}, {4000, 0.91, 1.0}, {6000, 0.87, 0.99}, {8000, 0.86, 0.95}, {10000, 0.85, 0.85}, {12000, 0.84, 0.75}, {14000, 0.83, 0.64}},
	"fluorescent_halophosphate":            {{100, 1.0, 1.0}, {500, 0.97, 1.0}, {1000, 0.94, 1.0}, {1500, 0.91, 1.0}, {2000, 0.89, 1.0}, {4000, 0.83, 1.0}, {6000, 0.8, 0.99}, {8000, 0.78, 0.95}, {10000, 0.76, 0.85}, {12000, 0.74, 0.75}, {14000, 0.72, 0.64}},
	"metal_halide":                         {{100, 1.0, 1.0}, {500, 0.96, 1.0}, {1000, 0.93, 0.97}, {1500, 0.9, 0.96}, {2000, 0.87, 0.95}, {4000, 0.78, 0.93}, {6000, 0.72, 0.91}, {8000, 0.69, 0.87}, {10000, 0.66, 0.83}, {12000, 0.63, 0.77}, {14000, 0.6, 0.7}},
	"high_pressure_sodium":                 {{100, 1.0, 1.0}, {500, 1.0, 1.0}, {1000, 0.98, 1.0}, {1500, 0.97, 1.0}, {2000, 0.96, 0.99}, {4000, 0.93, 0.98}, {6000, 0.91, 0.96}, {8000, 0.89, 0.94}, {10000, 0.88, 0.92}, {12000, 0.87, 0.89}, {14000, 0.86, 0.85}},
	"high_pressure_sodium_improved_colour": {{100, 1.0, 1.0}, {500, 0.99, 1.0}, {1000, 0.97, 1.0}, {1500, 0.95, 0.99}, {2000, 0.94, 0.98}, {4000, 0.89, 0.96}, {6000, 0.84, 0.9}, {8000, 0.81, 0.79}, {10000, 0.79, 0.65}, {12000, 0.78, 0.5}},
	"incandescent":                         {{100, 1, 1}, {500, 0.97, 0.98}, {1000, 0.93, 0.5}},
	"tungsten_halogen":                     {{100, 1, 1}, {500, 0.99, 1}, {1000, 0.97, 1}, {1500, 0.95, 0.78}, {2000, 0.95, 0.5}},
	"compact_fluorescent":                  {{2000, 0.91, 0.99}, {4000, 0.89, 0.98}, {6000, 0.87, 0.94}, {8000, 0.85, 0.9}, {10000, 0.83, 0.5}},
}

// factorYears are the columns of both tables below: years since the last cleaning.
var factorYears = [...]float64{0.5, 1, 1.5, 2, 2.5, 3}

// luminaireFactors (LMF) is what dirt on the luminaire leaves, by category (CIE 97: A bare batten, B open top, ventilated,
// C closed top, D enclosed IP2X, E dustproof IP5X, F indirect uplight) and surroundings (clean, normal, dirty). Category
// G has no figures here. From memory.
var luminaireFactors = map[string][3][len(factorYears)]float64{
	"A": {
		{0.95, 0.93, 0.91, 0.89, 0.87, 0.85},
		{0.92, 0.89, 0.87, 0.84, 0.82, 0.79},
		{0.88, 0.83, 0.8, 0.78, 0.75, 0.73},
	},
	"B": {
		{0.95, 0.9, 0.87, 0.84, 0.82, 0.79},
		{0.91, 0.86, 0.83, 0.8, 0.76, 0.74},
		{0.88, 0.83, 0.79, 0.75, 0.71, 0.68},
	},
	"C": {
		{0.93, 0.89, 0.84, 0.8, 0.77, 0.74},
		{0.89, 0.81, 0.74, 0.69, 0.64, 0.61},
		{0.83, 0.72, 0.64, 0.59, 0.54, 0.52},
	},
	"D": {
		{0.92, 0.88, 0.85, 0.83, 0.81, 0.79},
		{0.87, 0.82, 0.79, 0.77, 0.75, 0.73},
		{0.83, 0.77, 0.73, 0.71, 0.68, 0.65},
	},
	"E": {
		{0.96, 0.94, 0.92, 0.91, 0.9, 0.9},
		{0.93, 0.9, 0.88, 0.86, 0.85, 0.84},
		{0.91, 0.86, 0.83, 0.81, 0.8, 0.79},
	},
	"F": {
		{0.92, 0.86, 0.81, 0.77, 0.73, 0.7},
		{0.89, 0.81, 0.73, 0.66, 0.6, 0.55},
		{0.85, 0.74, 0.65, 0.57, 0.51, 0.45},
	},
}

// surfaceFactors (RSMF) is what dirt on the surfaces of the room leaves, by size of the room (room index 0.7: small; 2.5 to
// 5: medium or large) and distribution of the flux. From memory.
var surfaceFactors = map[[2]string][3][len(factorYears)]float64{
	{"small", "direct"}: {
		{0.97, 0.97, 0.96, 0.95, 0.94, 0.94},
		{0.96, 0.94, 0.94, 0.93, 0.92, 0.92},
		{0.95, 0.93, 0.92, 0.9, 0.89, 0.88},
	},
	{"small", "direct_indirect"}: {
		{0.94, 0.9, 0.89, 0.87, 0.85, 0.83},
		{0.88, 0.86, 0.83, 0.82, 0.8, 0.79},
		{0.84, 0.82, 0.8, 0.78, 0.75, 0.74},
	},
	{"small", "indirect"}: {
		{0.9, 0.85, 0.83, 0.81, 0.77, 0.75},
		{0.84, 0.78, 0.75, 0.73, 0.7, 0.68},
		{0.8, 0.73, 0.69, 0.66, 0.62, 0.59},
	},
	{"medium_large", "direct"}: {
		{0.98, 0.98, 0.97, 0.96, 0.96, 0.96},
		{0.97, 0.96, 0.96, 0.95, 0.95, 0.95},
		{0.96, 0.95, 0.95, 0.94, 0.94, 0.94},
	},
	{"medium_large", "direct_indirect"}: {
		{0.95, 0.92, 0.9, 0.89, 0.87, 0.86},
		{0.9, 0.88, 0.86, 0.85, 0.84, 0.82},
		{0.86, 0.85, 0.83, 0.81, 0.79, 0.78},
	},
	{"medium_large", "indirect"}: {
		{0.92, 0.88, 0.86, 0.84, 0.81, 0.78},
		{0.87, 0.82, 0.79, 0.77, 0.74, 0.72},
		{0.83, 0.77, 0.74, 0.7, 0.67, 0.64},
	},
}

// outdoorFactors (LMF) after 1 and 3 years since the last cleaning by the first numeral of the IP code and pollution
// (low, medium, high): CIE 154:2003 as printed in a textbook on road lighting, table 13.2.
var outdoorFactors = map[[2]string][2]float64{
	{"IP2X", "high"}:   {0.53, 0.42},
	{"IP2X", "medium"}: {0.62, 0.53},
	{"IP2X", "low"}:    {0.82, 0.78},
	{"IP5X", "high"}:   {0.89, 0.76},
	{"IP5X", "medium"}: {0.90, 0.82},
	{"IP5X", "low"}:    {0.92, 0.88},
	{"IP6X", "high"}:   {0.91, 0.83},
	{"IP6X", "medium"}: {0.92, 0.87},
	{"IP6X", "low"}:    {0.93, 0.90},
}
