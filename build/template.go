package main

import (
	"fmt"
	"regexp"
	"strings"
)

var slot = regexp.MustCompile(`\{\{(\w+)\}\}`)

// fill puts the texts into the slots {{name}} of the template. Errors: a slot without a text, a text without its one
// slot, and a text that would end the element that holds it.
func fill(template string, texts map[string]string) (string, error) {
	used := map[string]int{}
	var wrong error
	filled := slot.ReplaceAllStringFunc(template, func(found string) string {
		name := strings.Trim(found, "{}")
		text, known := texts[name]
		if !known {
			wrong = fmt.Errorf("site/index.html: nothing is known of the slot %s", found)
		}
		used[name]++
		return text
	})
	for name, text := range texts {
		if used[name] != 1 {
			wrong = fmt.Errorf("site/index.html: the slot {{%s}} is there %d times, wanted once", name, used[name])
		}
		if low := strings.ToLower(text); strings.Contains(low, "</script") || strings.Contains(low, "</style") ||
			strings.Contains(low, "<!--") {
			wrong = fmt.Errorf("the text for {{%s}} would end its own element", name)
		}
	}
	return filled, wrong
}

var dataBlock = regexp.MustCompile(`(?s)<script type="text/plain"[^>]*>.*?</script>`)

// withoutDataBlocks returns the page without the blocks that no browser runs.
func withoutDataBlocks(html string) string {
	return dataBlock.ReplaceAllString(html, "")
}
