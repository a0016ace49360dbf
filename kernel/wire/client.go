package wire

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log"
	"time"

	"github.com/go-zeromq/zmq4"
)

// A Client is a front end's end of a kernel's channels, all but the heartbeat. Its methods may be called from any
// goroutine.
type Client struct {
	codec   *codec
	cancel  context.CancelFunc
	sockets [len(channels)]zmq4.Socket
	inbox   [len(channels)]*Queue[*Message]
}

// Dial connects to a kernel, which may still be starting: it tries until ctx is over. The client is subscribed to
// everything that the kernel broadcasts.
func Dial(ctx context.Context, c Connection) (*Client, error) {
	if err := c.checkScheme(); err != nil {
		return nil, fmt.Errorf("wire: %w", err)
	}
	life, cancel := context.WithCancel(context.Background())
	k := &Client{codec: newCodec(c, "client"), cancel: cancel}
	options := []zmq4.Option{
		zmq4.WithID(zmq4.SocketIdentity(k.codec.session)),
		zmq4.WithLogger(log.New(io.Discard, "", 0)),
		zmq4.WithDialerMaxRetries(0),
	}
	for _, ch := range []Channel{IOPub, Shell, Control, Stdin} { // who is subscribed before it asks misses nothing
		k.inbox[ch] = NewQueue[*Message]()
		if ch == IOPub {
			k.sockets[ch] = zmq4.NewSub(life, options...)
		} else {
			k.sockets[ch] = zmq4.NewDealer(life, options...)
		}
		if err := dial(ctx, k.sockets[ch], c, ch); err != nil {
			k.Close()
			return nil, fmt.Errorf("wire: cannot reach the kernel's %s channel: %w", ch, err)
		}
	}
	if err := k.sockets[IOPub].SetOption(zmq4.OptionSubscribe, ""); err != nil {
		k.Close()
		return nil, fmt.Errorf("wire: cannot subscribe: %w", err)
	}
	for _, ch := range []Channel{IOPub, Shell, Control, Stdin} {
		go k.receive(ch)
	}
	return k, nil
}

func dial(ctx context.Context, socket zmq4.Socket, c Connection, ch Channel) error {
	network, address := c.address(ch)
	if network == "unix" {
		network = "ipc"
	}
	for {
		err := socket.Dial(network + "://" + address)
		if err == nil {
			return nil
		}
		select {
		case <-time.After(10 * time.Millisecond):
		case <-ctx.Done():
			return errors.Join(err, ctx.Err())
		}
	}
}

func (k *Client) receive(ch Channel) {
	defer k.inbox[ch].End()
	for {
		raw, err := k.sockets[ch].Recv()
		if err != nil {
			return
		}
		// The other end holds the key, or can do whatever it likes anyway: what it gets wrong is left out.
		if m, err := k.codec.decode(0, raw.Frames); err == nil {
			k.inbox[ch].Put(m)
		}
	}
}

// Send sends a request on shell, control or stdin and returns its msg_id. Metadata and content are as for
// [Server.Reply].
func (k *Client) Send(ch Channel, kind string, metadata, content any) (id string, err error) {
	frames, id, err := k.codec.encode(kind, nil, metadata, content)
	if err != nil {
		return "", err
	}
	return id, k.sockets[ch].Send(zmq4.NewMsgFrom(frames...))
}

// Receive waits for the next message of any channel but the heartbeat. The result is false once ctx is over, or when the
// kernel has closed the connection and everything that it sent has been received.
func (k *Client) Receive(ctx context.Context, ch Channel) (*Message, bool) {
	return k.inbox[ch].Get(ctx)
}

// Close closes the connections.
func (k *Client) Close() {
	k.cancel()
	for _, s := range k.sockets {
		if s != nil {
			s.Close()
		}
	}
}
