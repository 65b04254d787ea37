package page

import "html/template"

// StyleSheet returns the style of the pages, for pages on lots: the same words
// of class mean the same there.
func StyleSheet() template.CSS { return template.CSS(pageCSS) }
