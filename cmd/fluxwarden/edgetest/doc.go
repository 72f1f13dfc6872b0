// Package edgetest runs the real program twice, as an edge and as its hub, with a link between them that is cut, slowed and restored.
package edgetest
