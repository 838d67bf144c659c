package measure

var classNames = [...]string{"pressure", "vibration", "temperature", "process"}

func (c Class) String() string {
	if int(c) < len(classNames) {
		return classNames[c]
	}
	return "invalid"
}
