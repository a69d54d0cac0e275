package burnhours

import (
	"errors"
	"fmt"
	"math"
)

// Value is one decoded field of a memory bank of lighting control gear (IEC 62386).
type Value struct {
	Name    string   // as the standard names it
	Unit    string   // s, V, A, Hz, h, %, degC; empty for counts, flags and ratios
	Value   *float64 // nil where the gear does not know it: all bits set, or all but the last
	AtLeast bool     // the counter stands at its greatest value and counts no further
}

// field is one line of a bank: where it stands, how wide it is and what one step is worth.
type field struct {
	name   string
	at     int // address of the first byte; the most significant comes first
	bytes  int
	unit   string
	scale  float64 // 0 means 1
	offset float64 // added after scaling
	most   uint64  // greatest valid value; 0 where only the masks bound it
	counts bool    // a counter: at its greatest value it stands still
	tmask  bool    // "temporarily unknown" exists besides "unknown"
}

const (
	least3 = 0xFFFFFD
	least4 = 0xFFFFFFFD
)

// banks are 205 and 206 of IEC 62386-253 (diagnostics of control gear and of the light source) and 207 (maintenance
// of the luminaire). A temperature is its byte less 60.
var banks = map[int][]field{
	205: {
		{name: "ControlGearOperatingTime", at: 0x04, bytes: 4, unit: "s", most: least4, counts: true},
		{name: "ControlGearStartCounter", at: 0x08, bytes: 3, most: least3, counts: true},
		{name: "ControlGearExternalSupplyVoltage", at: 0x0B, bytes: 2, unit: "V", scale: 0.1, most: 0xFFFD, tmask: true},
		{name: "ControlGearExternalSupplyVoltageFrequency", at: 0x0D, bytes: 1, unit: "Hz", most: 0xFD, tmask: true},
		{name: "ControlGearPowerFactor", at: 0x0E, bytes: 1, scale: 0.01, most: 100, tmask: true},
		{name: "ControlGearOverallFailureCondition", at: 0x0F, bytes: 1},
		{name: "ControlGearOverallFailureConditionCounter", at: 0x10, bytes: 1, most: 0xFD, counts: true},
		{name: "ControlGearExternalSupplyUndervoltage", at: 0x11, bytes: 1, tmask: true},
		{name: "ControlGearExternalSupplyUndervoltageCounter", at: 0x12, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "ControlGearExternalSupplyOvervoltage", at: 0x13, bytes: 1, tmask: true},
		{name: "ControlGearExternalSupplyOvervoltageCounter", at: 0x14, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "ControlGearOutputPowerLimitation", at: 0x15, bytes: 1, tmask: true},
		{name: "ControlGearOutputPowerLimitationCounter", at: 0x16, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "ControlGearThermalDerating", at: 0x17, bytes: 1, tmask: true},
		{name: "ControlGearThermalDeratingCounter", at: 0x18, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "ControlGearThermalShutdown", at: 0x19, bytes: 1, tmask: true},
		{name: "ControlGearThermalShutdownCounter", at: 0x1A, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "ControlGearTemperature", at: 0x1B, bytes: 1, unit: "degC", offset: -60, most: 0xFD},
		{name: "ControlGearOutputCurrentPercent", at: 0x1C, bytes: 1, unit: "%", most: 100},
	},
	206: {
		{name: "LightSourceStartCounterResettable", at: 0x04, bytes: 3, most: least3, counts: true},
		{name: "LightSourceStartCounter", at: 0x07, bytes: 3, most: least3, counts: true},
		{name: "LightSourceOnTimeResettable", at: 0x0A, bytes: 4, unit: "s", most: least4, counts: true},
		{name: "LightSourceOnTime", at: 0x0E, bytes: 4, unit: "s", most: least4, counts: true},
		{name: "LightSourceVoltage", at: 0x12, bytes: 2, unit: "V", scale: 0.1, most: 0xFFFD},
		{name: "LightSourceCurrent", at: 0x14, bytes: 2, unit: "A", scale: 0.001, most: 0xFFFD},
		{name: "LightSourceOverallFailureCondition", at: 0x16, bytes: 1},
		{name: "LightSourceOverallFailureConditionCounter", at: 0x17, bytes: 1, most: 0xFD, counts: true},
		{name: "LightSourceShortCircuit", at: 0x18, bytes: 1, tmask: true},
		{name: "LightSourceShortCircuitCounter", at: 0x19, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "LightSourceOpenCircuit", at: 0x1A, bytes: 1, tmask: true},
		{name: "LightSourceOpenCircuitCounter", at: 0x1B, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "LightSourceThermalDerating", at: 0x1C, bytes: 1, tmask: true},
		{name: "LightSourceThermalDeratingCounter", at: 0x1D, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "LightSourceThermalShutdown", at: 0x1E, bytes: 1, tmask: true},
		{name: "LightSourceThermalShutdownCounter", at: 0x1F, bytes: 1, most: 0xFD, counts: true, tmask: true},
		{name: "LightSourceTemperature", at: 0x20, bytes: 1, unit: "degC", offset: -60, most: 0xFD, tmask: true},
	},
	207: {
		{name: "RatedMedianUsefulLifeOfLuminaire", at: 0x04, bytes: 1, unit: "h", scale: 1000, most: 0xFD, tmask: true},
		{name: "InternalControlGearReferenceTemperature", at: 0x05, bytes: 1, unit: "degC", offset: -60, most: 0xFD, tmask: true},
		{name: "RatedMedianUsefulLightSourceStarts", at: 0x06, bytes: 2, scale: 100, most: 0xFFFD, tmask: true},
	},
}

// Faults of memory banks.
var (
	ErrBank  = errors.New("only memory banks 205, 206 and 207 are read")
	ErrField = errors.New("a field is cut short or holds more than the standard allows")
)

// Bank decodes the bytes of a memory bank from address first on, as they were read from the gear. Fields outside the
// bytes are left out; one that they cut is ErrField, and so is a value above the greatest the standard allows.
func Bank(bank, first int, data []byte) ([]Value, error) {
	fields, ok := banks[bank]
	if !ok || first < 0 || first+len(data) > 0x100 {
		return nil, fmt.Errorf("%w: bank %d from address %d", ErrBank, bank, first)
	}
	var out []Value
	for _, f := range fields {
		from, to := f.at-first, f.at-first+f.bytes
		if to <= 0 || from >= len(data) {
			continue
		}
		if from < 0 || to > len(data) {
			return nil, fmt.Errorf("%w: %s", ErrField, f.name)
		}
		v, err := f.decode(data[from:to])
		if err != nil {
			return nil, err
		}
		out = append(out, v)
	}
	return out, nil
}

func (f field) decode(data []byte) (Value, error) {
	raw, mask := uint64(0), uint64(0)
	for _, b := range data {
		raw, mask = raw<<8|uint64(b), mask<<8|0xFF
	}
	v := Value{Name: f.name, Unit: f.unit}
	if raw == mask || f.tmask && raw == mask-1 {
		return v, nil
	}
	if f.most != 0 && raw > f.most {
		return v, fmt.Errorf("%w: %s is %d", ErrField, f.name, raw)
	}
	scale := f.scale
	if scale == 0 {
		scale = 1
	}
	x := float64(raw)*scale + f.offset
	v.Value, v.AtLeast = &x, f.counts && raw == f.most
	return v, nil
}

// SecondsToHours turns a counter of seconds, as control gear and building controllers count, into hours. raw comes as
// a number from whatever carried it: it fails with ErrNumber where it is none of 0 to 2^32-1. known is false for the
// values with which control gear says that it does not know (2^32-1 and 2^32-2).
func SecondsToHours(raw float64) (hours float64, known bool, err error) {
	if math.IsNaN(raw) || raw < 0 || raw > math.MaxUint32 || raw != math.Trunc(raw) {
		return 0, false, ErrNumber
	}
	if raw > least4 {
		return 0, false, nil
	}
	return raw / 3600, true, nil
}

// Reliability values of an object of a building controller (ASHRAE 135, BACnetReliability) that mean a lamp fault.
const lampFailure = 16

// StatusFlags are the four bits of an object of a building controller (ASHRAE 135).
type StatusFlags struct {
	InAlarm, Fault, Overridden, OutOfService bool
}

// Evidence reports whether a value read with these flags says anything about the light: one that was overridden or out
// of service does not. lampFailed is true where the reliability says that the lamp has failed.
func (f StatusFlags) Evidence(reliability uint32) (evidence, lampFailed bool) {
	return !f.Overridden && !f.OutOfService, reliability == lampFailure
}
