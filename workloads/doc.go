// Package workloads holds what sends: the packets of one way of one traffic
// aggregate, and the circuits that clients ask for.
//
// Each model has a plain configuration whose Check fills the defaults and
// reports every fault, and a constructor that makes a source of it. Packets with
// independent gaps come from StreamConfig, in bursts from MMPPConfig and, with
// bursts at all time scales, from OnOffConfig; calls from VoiceConfig and, with
// silences, TalkConfig; the rest from VideoConfig, FilesConfig and PagesConfig;
// requests for circuits from RequestsConfig.
//
// A source of packets follows the contract of nodes.Source; calls of Scale must
// come in order of their instants, else it panics. All sources are open loop:
// what they send does not depend on what the network does with it, so as-is and
// plan meet the same packets, born at the same instants.
//
// Every draw belongs to the source's name and the seed. Streams draw the gap
// and the size of packet i, or the arrival and the length of flow i, in the
// order of i, so a change of load moves the instants and keeps the draws: at
// 130 % the packets are the same ones, closer together.
//
// A packet is born where it stands whole at the ingress router. Rates and
// loads count IP bytes, headers included.
package workloads
