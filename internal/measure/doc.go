// Package measure condenses a turn and its windows into features: pressures, angles, work, efficiencies, exponents,
// rod loads, leak areas, event vibration, leak noise and cover temperatures.
package measure
