package duty

var stateNames = [...]string{"unknown", "stopped", "starting", "changing", "steady", "unloaded", "out-of-range"}

func (s State) String() string {
	if int(s) < len(stateNames) {
		return stateNames[s]
	}
	return "invalid"
}
