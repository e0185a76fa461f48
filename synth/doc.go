// Package synth makes the DATA that a coronagraph would record of a known corona,
// and, apart from it, the TRUTH.
//
//  1. A pixel of the image grid (package obs) is a ray along x through the corona;
//     ray.go places its samples.
//  2. At each sample the model gives field, density, temperature and field line
//     (package model), the atomic model the emissivities (package line), the driver
//     the trains of waves that pass (package wave).
//  3. truth.go turns the samples into the truth maps: values on the plane of the sky
//     and means weighted by emission and by wave power.
//  4. light.go adds up, frame by frame, the light of every sample through every filter
//     tuning, Doppler shifted by its own velocity at that tuning's time (package kernel).
//     window.go holds the light of some rows of the image at a time.
//  5. develop.go takes the light through the stages of the camera (package camera): the
//     Observation. budget.go says beforehand what it will be worth.
package synth
