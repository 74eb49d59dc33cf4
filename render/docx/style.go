package docx

import (
	"fmt"
	"strings"
)

const wordNS = `xmlns:w="http://schemas.openxmlformats.org/wordprocessingml/2006/main"`

// The faces, and those that take their place: equal in width.
const fonts = `<w:fonts ` + wordNS + `>` +
	`<w:font w:name="Liberation Serif"><w:altName w:val="Times New Roman"/><w:family w:val="roman"/><w:pitch w:val="variable"/></w:font>` +
	`<w:font w:name="Liberation Sans"><w:altName w:val="Arial"/><w:family w:val="swiss"/><w:pitch w:val="variable"/></w:font>` +
	`<w:font w:name="Liberation Mono"><w:altName w:val="Courier New"/><w:family w:val="modern"/><w:pitch w:val="fixed"/></w:font>` +
	`</w:fonts>`

const settings = `<w:settings ` + wordNS + `>` +
	`<w:defaultTabStop w:val="720"/>` +
	`<w:footnotePr><w:footnote w:id="-1"/><w:footnote w:id="0"/></w:footnotePr>` +
	`<w:compat><w:compatSetting w:name="compatibilityMode" w:uri="http://schemas.microsoft.com/office/word" w:val="15"/></w:compat>` +
	`<w:decimalSymbol w:val="."/><w:listSeparator w:val=","/>` +
	`</w:settings>`

// typeface names a face for all scripts that have it.
func typeface(name string) string {
	return `<w:rFonts w:ascii="` + name + `" w:hAnsi="` + name + `" w:cs="` + name + `"/>`
}

const (
	serif = "Liberation Serif"
	sans  = "Liberation Sans"
	mono  = "Liberation Mono"
)

// The sizes of type, in half points.
const (
	textSize  = 22
	tableSize = 19
	noteSize  = 18
	codeSize  = 17
)

func size(half int) string { return fmt.Sprintf(`<w:sz w:val="%d"/><w:szCs w:val="%d"/>`, half, half) }

// styles writes the style sheet. What a style does not say it has from Normal, and
// Normal from the defaults.
func styles(lang string) string {
	var b strings.Builder
	b.WriteString(`<w:styles ` + wordNS + `><w:docDefaults><w:rPrDefault><w:rPr>` + typeface(serif) + size(textSize) + `<w:lang w:val="` + language(lang) + `"/></w:rPr></w:rPrDefault>` +
		`<w:pPrDefault><w:pPr><w:spacing w:after="120" w:line="276" w:lineRule="auto"/></w:pPr></w:pPrDefault></w:docDefaults>`)
	b.WriteString(`<w:style w:type="paragraph" w:default="1" w:styleId="Normal"><w:name w:val="Normal"/><w:qFormat/></w:style>`)
	b.WriteString(`<w:style w:type="character" w:default="1" w:styleId="DefaultParagraphFont"><w:name w:val="Default Paragraph Font"/><w:uiPriority w:val="1"/><w:semiHidden/></w:style>`)
	b.WriteString(`<w:style w:type="table" w:default="1" w:styleId="TableNormal"><w:name w:val="Normal Table"/><w:uiPriority w:val="99"/><w:semiHidden/><w:tblPr><w:tblInd w:w="0" w:type="dxa"/>` +
		`<w:tblCellMar><w:top w:w="0" w:type="dxa"/><w:left w:w="108" w:type="dxa"/><w:bottom w:w="0" w:type="dxa"/><w:right w:w="108" w:type="dxa"/></w:tblCellMar></w:tblPr></w:style>`)
	b.WriteString(`<w:style w:type="numbering" w:default="1" w:styleId="NoList"><w:name w:val="No List"/><w:uiPriority w:val="99"/><w:semiHidden/></w:style>`)
	paragraph := func(id, name, next, ppr, rpr string) {
		b.WriteString(`<w:style w:type="paragraph" w:styleId="` + id + `"><w:name w:val="` + name + `"/><w:basedOn w:val="Normal"/>`)
		if next != "" {
			b.WriteString(`<w:next w:val="` + next + `"/>`)
		}
		b.WriteString(`<w:qFormat/>`)
		if ppr != "" {
			b.WriteString(`<w:pPr>` + ppr + `</w:pPr>`)
		}
		if rpr != "" {
			b.WriteString(`<w:rPr>` + rpr + `</w:rPr>`)
		}
		b.WriteString(`</w:style>`)
	}
	heads := []struct{ size, before, after int }{{30, 480, 160}, {25, 360, 120}, {22, 280, 80}, {21, 240, 60}, {21, 220, 60}, {21, 200, 60}}
	for i, h := range heads {
		level := itoa(i + 1)
		paragraph("Heading"+level, "heading "+level, "Normal",
			fmt.Sprintf(`<w:keepNext/><w:keepLines/><w:numPr><w:ilvl w:val="%d"/><w:numId w:val="1"/></w:numPr><w:spacing w:before="%d" w:after="%d" w:line="240" w:lineRule="auto"/><w:outlineLvl w:val="%d"/>`, i, h.before, h.after, i),
			typeface(sans)+`<w:b/><w:bCs/>`+size(h.size))
	}
	paragraph("Title", "Title", "Normal", `<w:keepNext/><w:spacing w:before="240" w:after="120" w:line="240" w:lineRule="auto"/>`, typeface(sans)+`<w:b/><w:bCs/>`+size(40))
	paragraph("Subtitle", "Subtitle", "Normal", `<w:spacing w:after="360" w:line="240" w:lineRule="auto"/>`, `<w:color w:val="555B61"/>`+size(textSize))
	paragraph("Caption", "caption", "Normal", `<w:keepLines/><w:spacing w:before="120" w:after="100" w:line="252" w:lineRule="auto"/>`, size(20))
	paragraph("Figure", "Figure", "Caption", `<w:keepNext/><w:spacing w:before="280" w:after="60" w:line="240" w:lineRule="auto"/><w:jc w:val="left"/>`, "")
	paragraph("TableText", "Table Text", "", `<w:spacing w:before="20" w:after="20" w:line="240" w:lineRule="auto"/>`, size(tableSize))
	paragraph("TableHead", "Table Head", "", `<w:keepNext/><w:spacing w:before="30" w:after="30" w:line="240" w:lineRule="auto"/>`, size(tableSize))
	paragraph("TableNote", "Table Note", "Normal", `<w:keepLines/><w:spacing w:before="50" w:after="0" w:line="240" w:lineRule="auto"/>`, size(17))
	paragraph("TableEnd", "Table End", "Normal", `<w:spacing w:before="0" w:after="200" w:line="120" w:lineRule="exact"/>`, size(4))
	paragraph("Quote", "Quote", "", `<w:ind w:left="567" w:right="567"/>`, "")
	paragraph("Code", "Code", "", `<w:spacing w:before="0" w:after="0" w:line="240" w:lineRule="auto"/><w:contextualSpacing/>`, typeface(mono)+size(codeSize))
	bar := `<w:pBdr><w:left w:val="single" w:sz="24" w:space="8" w:color="80858A"/></w:pBdr>`
	paragraph("BoxTitle", "Box Title", "BoxText", `<w:keepNext/>`+bar+`<w:spacing w:before="120" w:after="40"/><w:ind w:left="227"/>`, typeface(sans)+`<w:b/><w:bCs/>`+size(20))
	paragraph("BoxText", "Box Text", "", bar+`<w:ind w:left="227"/>`, "")
	paragraph("Break", "Break", "Normal", `<w:pBdr><w:bottom w:val="single" w:sz="4" w:space="1" w:color="80858A"/></w:pBdr><w:spacing w:before="120" w:after="240" w:line="120" w:lineRule="exact"/><w:ind w:left="3000" w:right="3000"/>`, "")
	paragraph("ListParagraph", "List Paragraph", "", "", "")
	for i := range 3 {
		level := itoa(i + 1)
		paragraph("TOC"+level, "toc "+level, "Normal", fmt.Sprintf(`<w:spacing w:after="40"/><w:ind w:left="%d"/>`, 284*i), "")
	}
	paragraph("Header", "header", "", `<w:spacing w:after="0" w:line="240" w:lineRule="auto"/>`, typeface(sans)+`<w:color w:val="555B61"/>`+size(16))
	paragraph("Footer", "footer", "", `<w:spacing w:after="0" w:line="240" w:lineRule="auto"/>`, typeface(sans)+`<w:color w:val="555B61"/>`+size(16))
	paragraph("FootnoteText", "footnote text", "", `<w:spacing w:after="40" w:line="240" w:lineRule="auto"/>`, size(noteSize))
	b.WriteString(`<w:style w:type="character" w:styleId="FootnoteReference"><w:name w:val="footnote reference"/><w:rPr><w:vertAlign w:val="superscript"/></w:rPr></w:style>`)
	b.WriteString(`<w:style w:type="character" w:styleId="Hyperlink"><w:name w:val="Hyperlink"/><w:rPr><w:color w:val="1B457A"/><w:u w:val="single"/></w:rPr></w:style>`)
	b.WriteString(`<w:style w:type="character" w:styleId="CodeText"><w:name w:val="Code Text"/><w:rPr>` + typeface(mono) + size(19) + `</w:rPr></w:style>`)
	b.WriteString(`<w:style w:type="table" w:styleId="Ruled"><w:name w:val="Ruled"/><w:basedOn w:val="TableNormal"/><w:tblPr>` +
		`<w:tblCellMar><w:left w:w="85" w:type="dxa"/><w:right w:w="85" w:type="dxa"/></w:tblCellMar></w:tblPr></w:style>`)
	b.WriteString(`</w:styles>`)
	return b.String()
}

// numbering writes how headings and lists are numbered: list 1 is that of the headings,
// 2 of points; each numbered list has one of its own.
func (b *builder) numbering() string {
	var s strings.Builder
	s.WriteString(`<w:numbering ` + wordNS + `>`)
	const levels = 9
	abstract := func(id int, level func(i int) string) {
		fmt.Fprintf(&s, `<w:abstractNum w:abstractNumId="%d"><w:multiLevelType w:val="multilevel"/>`, id)
		for i := range levels {
			s.WriteString(level(i))
		}
		s.WriteString(`</w:abstractNum>`)
	}
	abstract(0, func(i int) string {
		text := "%1"
		for k := 2; k <= i+1; k++ {
			text += fmt.Sprintf(".%%%d", k)
		}
		style := ""
		if i < 6 {
			style = fmt.Sprintf(`<w:pStyle w:val="Heading%d"/>`, i+1)
		}
		return fmt.Sprintf(`<w:lvl w:ilvl="%d"><w:start w:val="1"/><w:numFmt w:val="decimal"/>%s<w:suff w:val="tab"/><w:lvlText w:val="%s"/><w:lvlJc w:val="left"/><w:pPr><w:ind w:left="%d" w:hanging="%d"/></w:pPr></w:lvl>`,
			i, style, text, 567+142*i, 567+142*i)
	})
	signs := []string{"•", "–", "·"}
	abstract(1, func(i int) string {
		return fmt.Sprintf(`<w:lvl w:ilvl="%d"><w:start w:val="1"/><w:numFmt w:val="bullet"/><w:lvlText w:val="%s"/><w:lvlJc w:val="left"/><w:pPr><w:ind w:left="%d" w:hanging="284"/></w:pPr></w:lvl>`, i, signs[i%3], listStep*(i+1))
	})
	abstract(2, func(i int) string {
		return fmt.Sprintf(`<w:lvl w:ilvl="%d"><w:start w:val="1"/><w:numFmt w:val="decimal"/><w:lvlText w:val="%%%d."/><w:lvlJc w:val="left"/><w:pPr><w:ind w:left="%d" w:hanging="284"/></w:pPr></w:lvl>`, i, i+1, listStep*(i+1))
	})
	s.WriteString(`<w:num w:numId="1"><w:abstractNumId w:val="0"/></w:num><w:num w:numId="2"><w:abstractNumId w:val="1"/></w:num>`)
	for i, l := range b.ordered {
		fmt.Fprintf(&s, `<w:num w:numId="%d"><w:abstractNumId w:val="2"/><w:lvlOverride w:ilvl="%d"><w:startOverride w:val="%d"/></w:lvlOverride></w:num>`, firstOrdered+i, l.level, l.start)
	}
	s.WriteString(`</w:numbering>`)
	return s.String()
}
