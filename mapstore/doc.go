// Package mapstore keeps the versions of every floor: patches in, immutable
// snapshots out, a journal beneath.
package mapstore
