package retrofit

import "lampward/calc/loading"

// emergencyRules judge changes to emergency luminaires.
var emergencyRules = []Rule{
	{
		ID: "emergency_fitting_altered", Severity: Danger, Blocks: true, Subject: OnFixture,
		Trigger: "lamp, gear or battery of an emergency luminaire changed since its function test: danger where the model differs from what was " +
			"tested and nobody lists it, medium where it is like for like, until the function test is logged",
		Why:      "The escape light may fail when it is needed.",
		Basis:    "EN 60598-2-22:2014; pairings stated by makers",
		Remedy:   "Use a kit tested with the luminaire, and make the full duration test.",
		Cautions: []string{"CA-01", "CA-08", "CA-15"},
		fixture:  emergencyFittingAltered,
		only:     forEmergency,
	},
}

// emergency reports whether a luminaire has an emergency function.
func (v *fixtureView) emergency() bool {
	switch v.f.EmergencyMode {
	case "maintained", "non_maintained":
		return true
	case "none":
		return false
	}
	return is(v.m.Emergency) || v.driver != nil && v.driver.kind == emergencyPack
}

func emergencyFittingAltered(v *fixtureView) {
	if !v.emergency() {
		return
	}
	tested := v.f.Emergency
	if tested.Tested {
		if what, l := v.differs(tested); what != "" {
			f := v.found(Danger, certain)
			if l != nil {
				f.ofLamp(l.model)
			}
			f.say("The %s of this emergency luminaire %s not the one it was tested with, and nobody lists the change.", what, v.be(1))
			f.shows("now against the function test", what+": not as tested; pair listed: no")
			return
		}
	}
	if tested.ChangedLater || v.proposed {
		f := v.found(Medium, certain)
		f.Blocks = false
		if v.proposed {
			f.say("Changing this emergency luminaire asks for a function test before it is relied on.")
			f.shows("function test", "to be logged after the change")
		} else {
			f.say("This emergency luminaire was changed after its last function test.")
			f.shows("function test", "none logged after the change")
		}
	}
}

// differs names what is not as it was tested and not listed together either; the lamp with it if it is one.
func (v *fixtureView) differs(tested loading.EmergencyRecord) (string, *lampLoad) {
	none := loading.Key{}
	if tested.Lamp != none {
		for i := range v.lamps {
			l := &v.lamps[i]
			if l.model == nil || l.model.Key == none || l.model.Key == tested.Lamp {
				continue
			}
			if v.driver != nil {
				if ok, _ := v.driver.listed(l); ok {
					continue
				}
			}
			return "lamp", l
		}
	}
	if tested.Gear != none && v.driver != nil && v.driver.g.Key != none && v.driver.g.Key != tested.Gear {
		for i := range v.lamps {
			if ok, _ := v.driver.listed(&v.lamps[i]); ok {
				return "", nil
			}
		}
		return "gear", nil
	}
	if tested.Battery != "" && v.f.Battery != "" && tested.Battery != v.f.Battery {
		return "battery", nil
	}
	return "", nil
}
