package inspectpb

import "lapgate/pipeline"

func coordinates() []enum[string, Coordinates] {
	return []enum[string, Coordinates]{{"part", Coordinates_COORDINATES_PART}, {"station", Coordinates_COORDINATES_STATION}, {"camera", Coordinates_COORDINATES_CAMERA}}
}

// FromCoordinates refuses an unknown word.
func FromCoordinates(word string) (Coordinates, error) {
	c := numberOf(coordinates(), word)
	if c == Coordinates_COORDINATES_UNSPECIFIED {
		return c, pipeline.Invalid("coordinates: got %q, want part, station or camera", word)
	}
	return c, nil
}
