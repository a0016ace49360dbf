package wire

import (
	"testing"

	"github.com/go-zeromq/zmq4"
)

// JEP 65: a subscription is answered on its own topic, without a parent, to everybody whom that topic reaches; one that
// is no UTF-8 is ignored, and giving one up is not answered.
func TestWelcome(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	k := dialServer(t, s)
	ask(t, k, `{}`)
	decoded := func(frames [][]byte) *Message {
		t.Helper()
		m, err := newCodec(s.Connection(), "test").decode(0, frames)
		if err != nil {
			t.Fatalf("%v: %q", err, frames)
		}
		return m
	}
	expect := func(p *rawPeer, topic, content string) {
		t.Helper()
		m := decoded(p.message())
		if m.Type != "iopub_welcome" || string(m.Content) != content || string(m.Parent) != "{}" || string(m.Metadata) != "{}" {
			t.Errorf("%s %s with parent %s, want the welcome %s", m.Type, m.Content, m.Parent, content)
		}
		if len(m.Identities) != 1 || string(m.Identities[0]) != topic {
			t.Errorf("topic %q, want %q", m.Identities, topic)
		}
	}
	all, some := greeted(t, s, IOPub, zmq4.Sub, ""), greeted(t, s, IOPub, zmq4.XSub, "")
	all.send(wireFrame(0, "\x01"))
	expect(all, "", `{"subscription":""}`)
	some.send(wireFrame(0, "\x01ker\xff"), wireFrame(0, "\x01kernel."))
	expect(some, "kernel.", `{"subscription":"kernel."}`)
	expect(all, "kernel.", `{"subscription":"kernel."}`)
	some.send(wireFrame(flagCommand, "\x09SUBSCRIBEstatus <é>"))
	expect(some, "status <é>", `{"subscription":"status <é>"}`)
	expect(all, "status <é>", `{"subscription":"status <é>"}`)
	some.send(wireFrame(0, "\x00kernel."), wireFrame(flagCommand, "\x04PING\x00\x00"))
	some.frame() // the answer comes when what was before it has taken effect
	ask(t, k, `{}`)
	for _, want := range []string{"busy", "idle"} {
		if m := decoded(all.message()); string(m.Content) != `{"execution_state":"`+want+`"}` {
			t.Errorf("%s %s, want %s", m.Type, m.Content, want)
		}
	}
	some.send(wireFrame(0, "\x01kernel."))
	expect(some, "kernel.", `{"subscription":"kernel."}`) // and nothing of what came before
}
