package rules

// A Source says where the best value of a quantity comes from. The list is closed and only grows at its end.
type Source uint8

const (
	NoSource      Source = iota // no instrument gives a value that may be used
	FromPrimary                 // the primary instrument's own
	FromSecondary               // the second instrument's own
	DirectDiffuse               // direct on the horizontal plane plus diffuse
	GlobalDiffuse               // worked out from global less diffuse: it judges neither
	SourceCount   = iota
)

var sourceNames = [SourceCount]string{"", "primary", "secondary", "direct_and_diffuse", "global_and_diffuse"}

// String is the word that the archive stores; empty for none.
func (s Source) String() string { return sourceNames[s] }
