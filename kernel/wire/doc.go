// Package wire carries Jupyter messages over ZeroMQ, for a kernel ([Listen], [Server]) and for a front end ([Dial],
// [Client]).
//
// The layers, each in its own file and none aware of the one above:
//
//   - handshake.go, frames.go: ZMTP 3.0 (RFC 23 of the ZeroMQ project) as far as a peer can get it wrong
//   - peer.go, outbox.go: one connection, guarded in both directions
//   - door.go: the transport that zmq4 listens on; it hands over connections that are past their handshake
//   - tally.go: a subscriber inside the process, which tells when a broadcast has reached every peer's outbox
//   - codec.go, sign.go: a Jupyter message as frames, its signature, the memory against replays
//   - server.go, lobby.go, client.go: the five channels of a kernel, and their other end
//
// A new subscription is answered with iopub_welcome (JEP 65 of the Jupyter project), and a client's first request waits
// for it a little: see lobby.go.
//
// # Why a door of its own
//
// zmq4 v0.17.0 trusts its peers: it allocates what a frame's header announces, indexes READY metadata without looking,
// panics at a socket type it does not know, shakes hands inside its accept loop without a deadline, and writes to
// subscribers one after another, blocking. Any process of the machine can connect to a kernel's ports, so any of them
// could end or stop a kernel before a signature is looked at. [zmq4.RegisterTransport] lets a transport of ours stand in
// front of it, without a fork: what zmq4 reads are whole, well-formed messages of peers whose handshake is over, and what
// it writes goes to memory and never blocks.
//
// The rules a peer lives by:
//
//   - its handshake is over in 5 s, beside those of others, or the connection is closed;
//   - it costs the memory of what it has sent, never of what it announces, and no message exceeds the channel's limit;
//   - commands never reach the application: PING is answered, SUBSCRIBE and CANCEL become subscriptions;
//   - it may fall behind by 64 MB (plus the message that crosses the line); after that the broadcast waits for it as long
//     as it takes at least 4 MB a second, and then it is dropped. On the other channels it is dropped at once, and on the
//     heartbeat, which is answered without zmq4, after a second in which it takes nothing.
package wire
