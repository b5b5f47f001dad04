package quality

import (
	"fmt"
	"slices"
)

// counted writes "1 shot" or "7 shots".
func counted(list []int, noun string) string {
	if len(list) == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", len(list), noun)
}

// s3 is the ending of a verb of the third person.
func s3(list []int) string {
	if len(list) == 1 {
		return "s"
	}
	return ""
}

func have(list []int) string {
	if len(list) == 1 {
		return "has"
	}
	return "have"
}

func are(list []int) string {
	if len(list) == 1 {
		return "is"
	}
	return "are"
}

func contains(list []int, i int) bool { return slices.Contains(list, i) }
