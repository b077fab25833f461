// Package simrig is a whole rig in software: motor, driver, supply, encoder and
// the board on the near end of the wire. It answers the protocol as a board
// would and turns a shaft that obeys its own physics.
//
// It knows nothing of models that are fitted or gains that are designed: data
// made here must be able to prove those wrong. Its equations are therefore its
// own and finer than any model fitted to them: winding inductance, static,
// Coulomb, Stribeck and viscous friction per direction, a supply that sags and
// cannot sink, a driver with dead band and dead time, counts instead of speed.
//
// All quantities are SI and all angles are at the motor shaft. Time is in whole
// nanoseconds since power-on inside, so that equal instants compare equal.
package simrig
