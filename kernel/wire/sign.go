package wire

import (
	"crypto/hmac"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"hash"
	"sync"
)

// A signer signs and checks the four JSON frames of a message with HMAC-SHA256 over the bytes as they are on the wire.
// With an empty key nothing is signed and everything is accepted.
type signer struct {
	key  []byte
	macs sync.Pool // of hash.Hash with the key

	mu     sync.Mutex
	recent map[memo]struct{} // signatures accepted of late; guarded by mu
	older  map[memo]struct{} // those of the generation before; guarded by mu
}

type digest [sha256.Size]byte

// A memo is what is remembered of a signature. Nobody without the key can make two signatures that begin alike, and by
// chance it does not happen in half of one's bits.
type memo [sha256.Size / 2]byte

// generation is how many accepted signatures are remembered before the older half is forgotten: between 32,768 and
// 65,536 in all, one or two megabytes in a session that long. The reference kernel remembers 65,536.
const generation = 1 << 15

var (
	errUnsigned  = errors.New("unsigned")
	errSignature = errors.New("wrong signature")
	errReplay    = errors.New("replayed: this signature was accepted before")
)

func (s *signer) digest(frames [][]byte) (d digest) {
	mac, ok := s.macs.Get().(hash.Hash)
	if !ok {
		mac = hmac.New(sha256.New, s.key)
	}
	for _, f := range frames {
		mac.Write(f)
	}
	mac.Sum(d[:0])
	mac.Reset()
	s.macs.Put(mac)
	return d
}

// sign returns the signature frame.
func (s *signer) sign(frames [][]byte) []byte {
	if len(s.key) == 0 {
		return nil
	}
	d := s.digest(frames)
	return hex.AppendEncode(nil, d[:])
}

// verify checks a signature frame in constant time, and that it was not accepted before.
func (s *signer) verify(signature []byte, frames [][]byte) error {
	if len(s.key) == 0 {
		return nil
	}
	if len(signature) == 0 {
		return errUnsigned
	}
	var got digest
	if len(signature) != hex.EncodedLen(len(got)) {
		return errSignature
	}
	if _, err := hex.Decode(got[:], signature); err != nil {
		return errSignature
	}
	want := s.digest(frames)
	if !hmac.Equal(got[:], want[:]) {
		return errSignature
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	this := memo(want[:])
	_, again := s.recent[this]
	if !again {
		_, again = s.older[this]
	}
	if again {
		return errReplay
	}
	if s.recent == nil || len(s.recent) == generation {
		s.older, s.recent = s.recent, make(map[memo]struct{})
	}
	s.recent[this] = struct{}{}
	return nil
}
