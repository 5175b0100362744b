package report

import (
	_ "embed"
	"html/template"
)

//go:embed style.html
var pageStyle string

// parsePage makes the template of a page; {{template "style"}} in its head is
// the style all pages share.
func parsePage(name, text string, functions template.FuncMap) (*template.Template, error) {
	page, err := template.New(name).Funcs(functions).Parse(pageStyle)
	if err != nil {
		return nil, err
	}
	return page.Parse(text)
}
