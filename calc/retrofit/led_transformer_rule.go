package retrofit

// ledTransformerRules judge LED lamps on transformers made for filament lamps.
var ledTransformerRules = []Rule{}

// listed reports whether a pairing names this lamp with this gear, alone or with a dimmer it hangs on, and whether the
// number of lamps of that model is within what the pairing allows at the most. least is the pairing's least number of
// lamps, 0 where none is stated.
func (v *driverView) listed(l *lampLoad) (listed bool, least int) {
	if l.model == nil || v.d.Model == nil {
		return false, 0
	}
	return false, 0
}

// allListed reports whether every LED lamp on the gear is listed with it.
func (v *driverView) allListed() bool {
	for i := range v.lamps {
		if v.lamps[i].class != led {
			continue
		}
		if ok, _ := v.listed(&v.lamps[i]); !ok {
			return false
		}
	}
	return true
}
