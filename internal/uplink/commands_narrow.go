package uplink

import (
	"bufio"
	"fmt"
	"io"
	"net"
)

// maxInbound is the largest packet body that the MQTT library is shown, which takes memory for a whole packet before it
// looks at it: up to 256 MB by the length that the sender states (MQTT 3.1.1, section 2.2.3).
const maxInbound = 16 << 10

const (
	kindPublish = 3 // MQTT 3.1.1, table 2.1
	lengthBytes = 4 // of a remaining length at most
)

// narrow lets no packet through that is larger than most: a message is cut, so that whoever reads it sees that it is too
// long and the connection lives on; anything else ends the connection.
type narrow struct {
	net.Conn
	r          *bufio.Reader
	most       int
	head       []byte // of a packet, not yet passed on
	body, skip int    // bytes of it to pass on, then to leave out
}

func narrowed(c net.Conn, most int) *narrow {
	return &narrow{Conn: c, r: bufio.NewReader(c), most: most}
}

func (n *narrow) Read(p []byte) (int, error) {
	for len(p) > 0 {
		switch {
		case len(n.head) > 0:
			k := copy(p, n.head)
			n.head = n.head[k:]
			return k, nil
		case n.body > 0:
			k, err := n.r.Read(p[:min(len(p), n.body)])
			n.body -= k
			return k, err
		case n.skip > 0:
			k, err := n.r.Discard(min(n.skip, n.r.Size()))
			n.skip -= k
			if err != nil {
				return 0, err
			}
		default:
			if err := n.next(); err != nil {
				return 0, err
			}
		}
	}
	return 0, nil
}

// next reads a fixed header.
func (n *narrow) next() error {
	first, err := n.r.ReadByte()
	if err != nil {
		return err
	}
	length, head := 0, []byte{first}
	for i := 0; ; i++ {
		if i == lengthBytes {
			return fmt.Errorf("uplink: a packet's length has more than %d bytes", lengthBytes)
		}
		b, err := n.r.ReadByte()
		if err == io.EOF {
			err = io.ErrUnexpectedEOF
		}
		if err != nil {
			return err
		}
		head = append(head, b)
		length |= int(b&0x7f) << (7 * i)
		if b&0x80 == 0 {
			break
		}
	}
	n.head, n.body, n.skip = head, length, 0
	if length <= n.most {
		return nil
	}
	if first>>4 != kindPublish {
		return fmt.Errorf("uplink: a packet of kind %d with %d bytes", first>>4, length)
	}
	n.head, n.body, n.skip = append([]byte{first}, varint(n.most)...), n.most, length-n.most
	return nil
}

// varint is a remaining length as it stands in a packet.
func varint(v int) (out []byte) {
	for {
		b := byte(v & 0x7f)
		if v >>= 7; v > 0 {
			out = append(out, b|0x80)
			continue
		}
		return append(out, b)
	}
}
