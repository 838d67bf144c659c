package window

var stateNames = [...]string{"lost", "following", "holding", "idle", "not-delivering"}

func (s State) String() string {
	if int(s) < len(stateNames) {
		return stateNames[s]
	}
	return "invalid"
}
