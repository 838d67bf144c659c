package wire

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Command is an order that comes over MQTT. Its request is a name that the sender makes up, never the same for two
// commands: the receipt carries it, and a repeat of it is answered and not carried out again. Schema: command.
type Command struct {
	Request string `json:"request"`
	Order
}

const maxRequest = 64 // characters

// CommandVerbs are the orders that a skid file can allow over MQTT. Learning, and taking alarms out of service, is for
// somebody who stands at the machine.
func CommandVerbs() []string {
	return []string{VerbAcknowledge, VerbCutClip, VerbRebirth, VerbReset, VerbShelve, VerbUnshelve}
}

// ParseCommand reads one command as strictly as ParseOrder reads an order. With an error it still gives what could be
// read of it, for the receipt and the journal.
func ParseCommand(raw []byte) (Command, error) {
	var c Command
	err := strict(raw, &c)
	if err == nil {
		err = c.checkRequest()
	}
	c.Request = clean(c.Request, maxRequest)
	return c, err
}

func (c *Command) checkRequest() error {
	switch n := utf8.RuneCountInString(c.Request); {
	case strings.TrimSpace(c.Request) == "":
		return fmt.Errorf("wire: %w: it has no request, the name by which its receipt is known", ErrOrder)
	case n > maxRequest:
		return fmt.Errorf("wire: %w: request of %d characters, %d are allowed", ErrOrder, n, maxRequest)
	case strings.ContainsFunc(c.Request, unicode.IsControl):
		return fmt.Errorf("wire: %w: request is not one line of text", ErrOrder)
	}
	return nil
}
