package protocol

// keyIndex knows where the keys of a protocol file stand.
type keyIndex struct{}
