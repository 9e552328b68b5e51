package track

import (
	"image"

	"leadline/engine/geo"
)

// Relief paints the heights in a box in light greys, high is light, shaded from
// the north-west; voids are white.
func Relief(f geo.Field, b geo.Box) image.Image { return relief(f, b) }
