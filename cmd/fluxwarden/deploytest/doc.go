// Package deploytest holds the files of deploy/ to what the program really does: names, links, advice, settings. It has tests only.
package deploytest
