package stats

// HuberProposal2Steps lets the reference driver stop where its reference stops.
var HuberProposal2Steps = huberProposal2
