// Package templates embeds the report templates with their parts, the style sheet of
// the HTML page, and the built-in trial of the Hollowmere research farm.
package templates

import "embed"

// FS holds the report templates and their parts, style.css, demo/, a whole trial folder,
// and start/, a folder for each design with a protocol to start from.
//
//go:embed *.md parts *.css demo start
var FS embed.FS
