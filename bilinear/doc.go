// Package bilinear takes analogue circuits to discrete time by the bilinear transform.
//
// Symbols and units: T, the step in s; s, the Laplace variable in rad/s; z, the shift of one step ahead;
//
//	s = (2/T)·(z − 1)/(z + 1)
//
// maps the imaginary axis to the unit circle: the circuit's response at frequency fa appears at f with
//
//	fa = (1/πT)·tan(π·f·T).
//
// The transform is the trapezoidal rule, so it can be had in two ways: of a rational transfer function, coefficient by
// coefficient ([Biquad]), or of a whole circuit with every capacitor replaced by its companion ([Compile]), where
// amplifiers keep their limits: slew rate and output swing are solved exactly at each step.
package bilinear
