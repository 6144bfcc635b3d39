// Package floor is the content of one version of a floor: settings, occupancy, features.
package floor
