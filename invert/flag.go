package invert

import "offplane/synth/obs"

// Bits of FLAG. A pixel without B has at least one blocking bit; advisory bits
// qualify a pixel that may well have one.
const (
	FlagOutside     int32 = 1 << iota // blocking
	FlagNoLine                        // blocking
	FlagBadSeries                     // blocking
	FlagIslandSmall                   // blocking
	FlagIslandRound                   // blocking
	FlagTrackShort                    // blocking
	FlagNoSpeed                       // blocking
	FlagNoRatio                       // blocking
	FlagDensity                       // blocking
	FlagRepaired                      // advisory from here on
	FlagNarrow
	FlagBelowNoise
	FlagIslandFills
	FlagOneSided
	FlagUndirected
	FlagInward
	FlagNoOther
)

// Blocking holds the bits that leave a pixel without B.
const Blocking = FlagOutside | FlagNoLine | FlagBadSeries | FlagIslandSmall | FlagIslandRound |
	FlagTrackShort | FlagNoSpeed | FlagNoRatio | FlagDensity

// FlagCodes returns the meaning of the bits of FLAG, blocking bits first.
func FlagCodes() []obs.Code {
	return []obs.Code{
		{Value: FlagOutside, Name: "OUTSIDE", About: "no field: outside the observed field"},
		{Value: FlagNoLine, Name: "NO_LINE", About: "no field: mean profile of the first line is not a Gaussian"},
		{Value: FlagBadSeries, Name: "BAD_SERIES", About: "no field: more than a quarter of the frames are bad"},
		{Value: FlagIslandSmall, Name: "ISLAND_SMALL", About: "no field: coherence island too small for a direction"},
		{Value: FlagIslandRound, Name: "ISLAND_ROUND", About: "no field: coherence island too round for a direction"},
		{Value: FlagTrackShort, Name: "TRACK_SHORT", About: "no field: track too short"},
		{Value: FlagNoSpeed, Name: "NO_SPEED", About: "no field: no significant positive phase speed"},
		{Value: FlagNoRatio, Name: "NO_RATIO", About: "no field: no profile of the second line"},
		{Value: FlagDensity, Name: "DENSITY", About: "no field: line ratio outside the range of the atomic data"},
		{Value: FlagRepaired, Name: "REPAIRED", About: "some bad frames were interpolated in time"},
		{Value: FlagNarrow, Name: "NARROW", About: "line narrower than the filter: no width"},
		{Value: FlagBelowNoise, Name: "BELOW_NOISE", About: "band-passed power below the photon noise: no Doppler rms"},
		{Value: FlagIslandFills, Name: "ISLAND_FILLS", About: "coherence island fills its window: direction unsafe"},
		{Value: FlagOneSided, Name: "ONE_SIDED", About: "one arm of the track is less than half the other"},
		{Value: FlagUndirected, Name: "UNDIRECTED", About: "track runs along the limb: outward undefined; dominant wave taken"},
		{Value: FlagInward, Name: "INWARD", About: "unseparated waves run inward; speed is the absolute value"},
		{Value: FlagNoOther, Name: "NO_OTHER", About: "no significant phase speed from another estimator than the first"},
	}
}
