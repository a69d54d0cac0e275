package loading

// Stated plausible ranges of what a nameplate may leave out. A check whose input is unknown is worked out at both
// ends; it fails only where both fail, and asks where they differ.
const (
	// Minimum load of an electronic transformer as a share of its rating. Common practice, no source.
	ElectronicMinShareLow  = 0.25
	ElectronicMinShareHigh = 0.40

	// Power factor of an LED lamp. Common practice, no source.
	LEDPowerFactorLow  = 0.5
	LEDPowerFactorHigh = 0.9

	// Regulation of a wound transformer, %. From memory of handbooks.
	RegulationLowPct  = 5.0
	RegulationHighPct = 20.0

	// Regulation printed as a screening value where none is on file, %. Common practice, no source.
	RegulationScreeningPct = 10.0

	// Efficiency of wound gear. From memory of handbooks.
	WoundEfficiencyLow  = 0.80
	WoundEfficiencyHigh = 0.92

	// Module voltage about its typical value, and the further rise of a cold start. Common practice, no source.
	ModuleVoltageSpread = 0.10
	ModuleColdRise      = 0.08

	// Tolerance of a constant-current driver's output, %. From memory of IEC 62384.
	DriverCurrentTolerancePct = 10.0

	// A dimmer's rating for LED lamps as a share of its filament rating. Common practice, no source.
	DimmerLEDShareLow  = 0.10
	DimmerLEDShareHigh = 0.25
)
