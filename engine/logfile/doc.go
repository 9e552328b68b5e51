// Package logfile reads the logs that instruments and recorders write, and
// makes measurements of them: tables (CSV), told by a column file which column
// is what, and NMEA 0183 sentences, from a file or as they arrive.
//
// Both readers hand on one Record after another and keep a Tally of what
// became of each line. A line that cannot be used is counted with its reason
// and place and does not end the reading; an error does, and is about the
// whole log or of the one who takes the records.
//
// # What a sentence becomes
//
// The sigma is what Sentences says, and unless it says anything the default
// given here. A default is marked practice where it is common in the trade and
// has no source. The quantities are those of Sentences; where several
// sentences give one quantity, the first of its list that is heard is used,
// and another one after five seconds without it.
//
//	quantity      sentences           becomes               default sigma
//	depth         DPT DBT             sounding "sounder"    S-44 order 1a: √(0.5² + (0.013 d)²) / 1.96 m
//	heading       HDT HDG HDM VHW     heading "compass"     1° if measured true, 3° if magnetic; practice
//	turn_rate     ROT                 turn "turn_rate"      half of 0.5 °/min and 5 % of the rate (IMO A.526, from memory)
//	water_speed   VBW VHW             speed "water_speed"   0.3 m/s, a weak current included; practice
//	ground_speed  VBW VTG RMC         speed "ground_speed"  0.1 m/s, with its course from VTG and RMC; practice
//	fix           GGA RMC GLL         fix "fix"             an axis: 4 m × HDOP, differential 1 m × HDOP, float 0.5 m, fixed 0.05 m; HDOP 2 unless told; practice
//	(time)        ZDA RMC GGA GLL     the time of all others
//
// ROT: the turn between two rates is their mean times the time dt between them,
// at most ten seconds; its variance is σ²·dt·max(dt, 1 s), and (Δ·dt)²/12 for
// rates that differ by Δ, since the rate was anywhere between them.
//
// DPT: an offset above 0 is the transducer's depth below the waterline; one
// below 0 is measured to the keel and says nothing of the waterline. VBW: the
// speed along the keel; the one across it is used by dead reckoning alone.
// Directions are true: HDG adds its deviation and variation; HDM, a magnetic
// VHW and an HDG without variation need Sentences.VariationDeg and are refused
// without it. VTG and RMC without a true course give a speed without one.
//
// # Speed and heading to displacement
//
// On a plane, speed along the keel moves a belief only if its heading is among
// what is estimated, which costs several times as much. Sentences.Reckon makes
// displacements instead: see Reckon.
package logfile
