// Package demo runs the whole job once on an invented field: plan, rehearse,
// reduce, and a comparison of the cube with the truth of the rehearsal.
//
// The folder it makes holds {profile,target,scene}.yaml, sequence/, night/ and
// run/, each as the command of that name writes it.
package demo
