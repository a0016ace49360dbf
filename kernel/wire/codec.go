package wire

import (
	"bytes"
	"crypto/rand"
	"encoding/json"
	"errors"
	"fmt"
	"strconv"
	"sync/atomic"
	"time"
	"unicode/utf8"
)

// Version is the version of the messaging protocol that the kernel speaks.
const Version = "5.4"

var delimiter = []byte("<IDS|MSG>")

// A Message is a Jupyter message as it came, signature checked. Its parts are the bytes of the wire: an answer echoes
// Header as its parent byte for byte, whatever fields the client put there.
type Message struct {
	Identities [][]byte // routing frames: who sent it, or on iopub the topic
	ID         string   // msg_id of the header
	Type       string   // msg_type of the header
	ParentID   string   // msg_id of the parent header, "" where there is none

	Header, Parent, Metadata, Content json.RawMessage // each one a JSON object

	Buffers [][]byte
}

// A codec turns messages into frames and back. It is safe for concurrent use.
type codec struct {
	signer
	session  string
	username string
	count    atomic.Uint64 // messages encoded
}

func newCodec(c Connection, username string) *codec {
	return &codec{signer: signer{key: []byte(c.Key)}, session: newID(), username: username}
}

// newID returns a random identifier of 128 bits in the form of a UUID of version 4 (RFC 9562, 5.4).
func newID() string {
	var b [16]byte
	rand.Read(b[:])
	b[6] = b[6]&0x0f | 0x40
	b[8] = b[8]&0x3f | 0x80
	return fmt.Sprintf("%x-%x-%x-%x-%x", b[:4], b[4:6], b[6:8], b[8:10], b[10:])
}

// An object of JSON without members stands for what a message does not have.
var empty = json.RawMessage("{}")

type header struct {
	ID       string `json:"msg_id"`
	Session  string `json:"session"`
	Username string `json:"username"`
	Date     string `json:"date"`
	Type     string `json:"msg_type"`
	Version  string `json:"version"`
}

// encode returns the frames of a new message, from the delimiter on, and its msg_id. content and metadata are marshalled,
// or taken as they are if they are a json.RawMessage; nil stands for an empty object.
func (c *codec) encode(kind string, parent json.RawMessage, metadata, content any) (frames [][]byte, id string, err error) {
	id = c.session + "_" + strconv.FormatUint(c.count.Add(1), 10)
	head, err := marshal(header{
		ID: id, Session: c.session, Username: c.username, Type: kind, Version: Version,
		Date: time.Now().UTC().Format("2006-01-02T15:04:05.000000Z"),
	})
	if err != nil {
		return nil, "", err
	}
	if parent == nil {
		parent = empty
	}
	meta, err := marshal(metadata)
	if err != nil {
		return nil, "", fmt.Errorf("wire: metadata of %s: %w", kind, err)
	}
	body, err := marshal(content)
	if err != nil {
		return nil, "", fmt.Errorf("wire: content of %s: %w", kind, err)
	}
	frames = [][]byte{delimiter, nil, head, parent, meta, body}
	frames[1] = c.sign(frames[2:])
	return frames, id, nil
}

// marshal leaves <, > and & alone: as escapes they would blow up every figure's SVG.
func marshal(v any) (json.RawMessage, error) {
	switch v := v.(type) {
	case nil:
		return empty, nil
	case json.RawMessage:
		return v, nil
	}
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	if err := e.Encode(v); err != nil {
		return nil, err
	}
	return bytes.TrimSuffix(b.Bytes(), []byte("\n")), nil
}

// decode checks and takes apart the frames of a message, routing frames included. The first routed of them were put there
// by the socket: an identity may look like the delimiter.
func (c *codec) decode(routed int, frames [][]byte) (*Message, error) {
	at := routed
	for at < len(frames) && !bytes.Equal(frames[at], delimiter) {
		at++
	}
	if at >= len(frames) {
		return nil, fmt.Errorf("malformed: no %s among %d frames", delimiter, len(frames))
	}
	rest := frames[at+1:]
	if len(rest) < 5 {
		return nil, fmt.Errorf("malformed: %d frames after the delimiter, not signature, header, parent, metadata and content", len(rest))
	}
	if err := c.verify(rest[0], rest[1:5]); err != nil {
		return nil, err
	}
	for i, name := range []string{"header", "parent header", "metadata", "content"} {
		part := bytes.TrimLeft(rest[1+i], " \t\r\n")
		if len(part) == 0 || part[0] != '{' || !utf8.Valid(part) || !json.Valid(part) {
			return nil, fmt.Errorf("malformed: the %s is no JSON object", name)
		}
	}
	m := &Message{
		Identities: frames[:at], Header: rest[1], Parent: rest[2], Metadata: rest[3], Content: rest[4], Buffers: rest[5:],
	}
	var head, parent struct {
		ID   string `json:"msg_id"`
		Type string `json:"msg_type"`
	}
	if err := json.Unmarshal(m.Header, &head); err != nil {
		return nil, fmt.Errorf("malformed: header: %w", err)
	}
	if head.ID == "" || head.Type == "" {
		return nil, errors.New("malformed: a header without msg_id or msg_type")
	}
	if err := json.Unmarshal(m.Parent, &parent); err != nil {
		return nil, fmt.Errorf("malformed: parent header: %w", err)
	}
	m.ID, m.Type, m.ParentID = head.ID, head.Type, parent.ID
	return m, nil
}
