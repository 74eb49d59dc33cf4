// Package templates embeds the report templates with their parts, the style sheet of
// the HTML page, and the built-in trial of the Hollowmere research farm.
package templates

import "embed"

// FS holds audit.md and its parts, style.css, and demo/, a whole trial folder.
//
//go:embed *.md parts *.css demo
var FS embed.FS
