// Package ensemble computes many scenarios that differ in chosen parameters and keeps
// of each what a correction table needs.
//
// An ensemble file names a base scenario, parameters that vary and a design. Member
// number i is a pure function of that file and i: where, when and beside which others it
// is computed changes no byte of it. So an ensemble may be computed in parts, on several
// machines and in several tries; its folder holds one folder a member.
package ensemble
