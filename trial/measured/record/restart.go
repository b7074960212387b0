package record

import "io"

// Restarted is a Source for a record that can only be read from its beginning,
// such as a compressed one: open starts again, once for each reading and once
// more to look up the totals in the end mark. Whatever open returns is the
// caller's to close.
func Restarted(name string, open func() (io.Reader, error)) Source {
	var tail end
	return func() (Stream, error) {
		r, err := open()
		if err != nil {
			return nil, err
		}
		rd, err := NewReader(name, r)
		if err != nil {
			return nil, err
		}
		if tail == nil {
			again, err := open()
			if err != nil {
				return nil, err
			}
			if _, err := io.Copy(&tail, again); err != nil {
				return nil, err
			}
		}
		if e := rd.lookUpTotals(tail); e != nil {
			return nil, rd.place(e, 0)
		}
		return rd, nil
	}
}

// tailBytes hold the end mark of either form.
const tailBytes = 512

// end keeps the last bytes of what is written to it.
type end []byte

func (e *end) Write(p []byte) (int, error) {
	n := len(p)
	p = p[max(0, n-tailBytes):]
	*e = append((*e)[max(0, len(*e)+len(p)-tailBytes):], p...)
	return n, nil
}
