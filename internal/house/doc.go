// Package house holds no code: its test keeps the imports of the other
// packages pointing one way, down.
package house
