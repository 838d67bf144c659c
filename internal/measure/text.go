package measure

var classNames = [...]string{"pressure", "vibration", "temperature", "process"}

var sharingNames = [...]string{Alone: "alone", Separated: "separated", OneSided: "one-sided", Shared: "shared", CrossTalk: "cross-talk"}

// String names the case as records do.
func (s Sharing) String() string {
	if int(s) < len(sharingNames) {
		return sharingNames[s]
	}
	return "invalid"
}

func (c Class) String() string {
	if int(c) < len(classNames) {
		return classNames[c]
	}
	return "invalid"
}
