package retrofit

// failureRules judge what the record of failures says.
var failureRules = []Rule{
	{
		ID: "repeat_failure", Severity: Medium, Subject: OnFixture,
		Trigger:  "two failures or more in one holder, or of one gear, within 12 months",
		Why:      "The lamp is the victim: look at the gear, not the lamp.",
		Basis:    "failures on record",
		Remedy:   "Check the gear, the voltage and the heat before fitting another.",
		Cautions: []string{"CA-01", "CA-02"},
		fixture:  repeatFailure,
		driver:   repeatGearFailure,
	},
}

func repeatFailure(v *fixtureView) {
	if v.f.FailuresInYear >= 2 {
		f := v.found(Medium, certain)
		f.say("One holder of this luminaire had at least two failures within %d months.", FailureMonths)
		f.shows("failures on record", "2 or more in one holder")
	}
}

func repeatGearFailure(v *driverView) {
	if v.d.FailuresInYear >= 2 {
		f := v.found(Medium, certain)
		f.say("The gear in this place failed at least twice within %d months.", FailureMonths)
		f.shows("failures on record", "2 or more of the gear")
	}
}
