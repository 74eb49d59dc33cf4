package pdf

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"maps"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// Conformance clause by clause: what ISO 19005-3 (PDF/A-3, level b), ISO 32000-1 (PDF
// 1.7) and ISO 14289-1 (PDF/UA-1, which the file does not claim but follows) ask of a
// file, read from its bytes. Numbers of clauses are from memory.

// Struct is an element of the structure as it is read back.
type Struct struct {
	Kind, Alt, ID string
	Scope         string
	Span          int
	Text          string // of its own content and that of inline elements in it
	Kids          []*Struct
	object        int
	links         []int
	content       bool
	box           []float64
	page          int
}

// Leaves are the kinds of elements that hold text rather than other blocks.
var Leaves = map[string]bool{"H1": true, "H2": true, "H3": true, "H4": true, "H5": true, "H6": true, "P": true, "Lbl": true,
	"Caption": true, "Code": true, "TH": true, "TD": true, "TOCI": true, "Figure": true}

var inline = map[string]bool{"Span": true, "Link": true, "Reference": true}

// Expand gives the file with the objects that are packed together written out behind
// it, for tests that look for words.
func Expand(file []byte) []byte {
	r, err := open(file)
	if err != nil {
		return file
	}
	out := bytes.Clone(file)
	for _, n := range slices.Sorted(maps.Keys(r.packed)) {
		b, err := r.bundle(r.packed[n].stream)
		if err != nil {
			return file
		}
		k := r.packed[n].index
		end := len(b.data)
		if k+1 < len(b.offsets) {
			end = b.offsets[k+1]
		}
		out = fmt.Appendf(out, "%d 0 obj\n%s\nendobj\n", n, bytes.TrimSpace(b.data[b.offsets[k]:end]))
	}
	return out
}

// checker reads a file and collects what is wrong with it.
type checker struct {
	*reader
	faults []string
	root   dict
	pages  []int       // objects
	index  map[int]int // of pages, by object
	fonts  map[int]*fontInfo
	text   map[[2]int]string // by page and MCID
	tags   map[[2]int]string
	count  []int // marked content by page
	annots map[int]int
	tree   *Struct
	parent map[int]any
	seen   map[[2]int]int // MCIDs met in the structure, by element
	linked map[int]int
}

func (c *checker) fault(clause, format string, args ...any) {
	c.faults = append(c.faults, clause+": "+fmt.Sprintf(format, args...))
}

func (c *checker) at(n any) dict {
	d, err := c.dict(n)
	if err != nil {
		c.fault("32000-1 7.3", "%v is no dictionary", n)
		return dict{}
	}
	return d
}

// list follows a reference to an array.
func (c *checker) list(v any) array {
	if n, ok := v.(refValue); ok {
		v, _, _ = c.object(int(n))
	}
	a, _ := v.(array)
	return a
}

func (c *checker) contents(v any) []byte {
	n, ok := v.(refValue)
	if !ok {
		c.fault("32000-1 7.3.8", "a stream is no indirect object")
		return nil
	}
	d, raw, err := c.object(int(n))
	if err != nil || raw == nil {
		c.fault("32000-1 7.3.8", "object %d is no stream: %v", n, err)
		return nil
	}
	s, ok := d.(dict)
	if !ok || s["F"] != nil || s["FFilter"] != nil {
		c.fault("19005-3 6.1.7.1", "a stream refers to a file outside")
	}
	data, err := c.unpack(s, raw)
	if err != nil {
		c.fault("32000-1 7.4", "object %d: %v", n, err)
	}
	return data
}

// Read reads the structure of a file; the faults are what breaks a clause.
func Read(file []byte) (*Struct, []string) {
	r, err := open(file)
	if err != nil {
		return nil, []string{err.Error()}
	}
	c := &checker{reader: r, index: map[int]int{}, fonts: map[int]*fontInfo{}, text: map[[2]int]string{}, tags: map[[2]int]string{},
		annots: map[int]int{}, parent: map[int]any{}, seen: map[[2]int]int{}, linked: map[int]int{}}
	c.file(file)
	c.root = c.at(r.trailer["Root"])
	c.document()
	c.metadata()
	c.attached()
	c.structureTree()
	return c.tree, c.faults
}

func (c *checker) file(file []byte) {
	if !bytes.HasPrefix(file, []byte("%PDF-1.7\n%")) || min(file[10], file[11], file[12], file[13]) < 128 || file[14] != '\n' {
		c.fault("19005-3 6.1.2", "the header is not as it should be")
	}
	if !bytes.HasSuffix(file, []byte("%%EOF\n")) {
		c.fault("19005-3 6.1.3", "the file does not end with its mark")
	}
	id, ok := c.trailer["ID"].(array)
	if !ok || len(id) != 2 || len(id[0].(string)) < 16 || len(id[1].(string)) < 16 {
		c.fault("19005-3 6.1.3", "the trailer has no identifier")
	}
	if c.trailer["Encrypt"] != nil {
		c.fault("19005-3 6.1.3", "the file is encrypted")
	}
	if regexp.MustCompile(`/(LZWDecode|Crypt|JavaScript|Launch|EmbeddedFile /F |Movie|Sound|XFA)\b`).Match(Expand(file)) {
		c.fault("19005-3 6.1.7.2, 6.4, 6.5", "a filter or an action is not allowed")
	}
	for n := range c.offsets {
		if _, _, err := c.object(n); err != nil {
			c.fault("19005-3 6.1.4", "object %d is not where the table says: %v", n, err)
		}
	}
	for n := range c.packed {
		if _, _, err := c.object(n); err != nil {
			c.fault("19005-3 6.1.4", "object %d is not where the table says: %v", n, err)
		}
	}
}

func (c *checker) document() {
	for _, k := range []string{"AA", "OpenAction", "OCProperties", "AcroForm", "Requirements", "Perms"} {
		if c.root[k] != nil {
			c.fault("19005-3 6.4, 6.5, 6.9, 6.10, 6.11", "the catalog has /%s", k)
		}
	}
	if m := c.at(c.root["MarkInfo"]); m["Marked"] != word("true") || m["Suspects"] == word("true") {
		c.fault("14289-1 7.1", "the file is not marked as tagged")
	}
	if c.at(c.root["ViewerPreferences"])["DisplayDocTitle"] != word("true") {
		c.fault("14289-1 7.1", "the title is not shown in the window")
	}
	// BCP 47, RFC 5646, as far as shapes go.
	if s, _ := c.root["Lang"].(string); !regexp.MustCompile(`^[A-Za-z]{2,8}(-[A-Za-z0-9]{1,8})*$`).MatchString(s) {
		c.fault("14289-1 7.2", "the language is %q", s)
	}
	intents := c.list(c.root["OutputIntents"])
	if len(intents) != 1 {
		c.fault("19005-3 6.2.3", "%d output intents", len(intents))
	} else {
		o := c.at(intents[0])
		icc := c.contents(o["DestOutputProfile"])
		if o["S"] != nameValue("GTS_PDFA1") || len(icc) < 128 || string(icc[16:20]) != "RGB " || string(icc[12:16]) != "mntr" || icc[8] > 4 ||
			int(binary.BigEndian.Uint32(icc)) != len(icc) || string(icc[36:40]) != "acsp" {
			c.fault("19005-3 6.2.3", "the output intent is no profile of a screen in RGB")
		}
	}
	var walk func(v any, parent any)
	walk = func(v any, parent any) {
		n, ok := v.(refValue)
		d := c.at(v)
		if !ok || parent != nil && d["Parent"] != parent {
			c.fault("32000-1 7.7.3", "a page does not know its parent")
		}
		if d["Type"] == nameValue("Page") {
			c.index[int(n)] = len(c.pages)
			c.pages = append(c.pages, int(n))
			return
		}
		kids := c.list(d["Kids"])
		before := len(c.pages)
		for _, k := range kids {
			walk(k, v)
		}
		if d["Count"] != float64(len(c.pages)-before) {
			c.fault("32000-1 7.7.3.2", "%v pages counted, %d there", d["Count"], len(c.pages)-before)
		}
	}
	walk(c.root["Pages"], nil)
	if labels := c.list(c.at(c.root["PageLabels"])["Nums"]); len(labels) != 2 || labels[0] != 0.0 || c.at(labels[1])["S"] != nameValue("D") {
		c.fault("32000-1 12.4.2", "pages are not labelled from 1")
	}
	c.count = make([]int, len(c.pages))
	for i, n := range c.pages {
		c.page(i, c.at(refValue(n)))
	}
	c.outline(c.root["Outlines"], nil)
}

func (c *checker) inherited(d dict, key string) any {
	for range 10 {
		if d[key] != nil {
			return d[key]
		}
		if d["Parent"] == nil {
			break
		}
		d = c.at(d["Parent"])
	}
	return nil
}

func (c *checker) page(i int, d dict) {
	box := c.list(c.inherited(d, "MediaBox"))
	if len(box) != 4 || box[2].(float64) < 3 || box[2].(float64) > 14400 || box[3].(float64) < 3 || box[3].(float64) > 14400 {
		c.fault("19005-3 6.1.13", "page %d measures %v", i, box)
	}
	if d["AA"] != nil || d["PresSteps"] != nil {
		c.fault("19005-3 6.5.2, 6.10", "page %d has actions", i)
	}
	resources := c.at(c.inherited(d, "Resources"))
	annots := c.list(d["Annots"])
	if len(annots) > 0 && d["Tabs"] != nameValue("S") {
		c.fault("14289-1 7.18.3", "page %d is not walked through by its structure", i)
	}
	for _, v := range annots {
		a := c.at(v)
		n, _ := v.(refValue)
		c.annots[int(n)] = i
		flags, _ := a["F"].(float64)
		if a["Subtype"] != nameValue("Link") || int(flags)&4 == 0 || int(flags)&(1|2|32|256) != 0 {
			c.fault("19005-3 6.3.1, 6.3.2", "page %d: annotation %v of flags %v", i, a["Subtype"], flags)
		}
		if s, _ := a["Contents"].(string); strings.TrimSpace(decode(s)) == "" {
			c.fault("14289-1 7.18.5", "page %d: a link does not say where it leads", i)
		}
		if a["StructParent"] == nil {
			c.fault("14289-1 7.18.1", "page %d: a link stands outside the structure", i)
		}
		r := c.list(a["Rect"])
		if len(r) != 4 || r[0].(float64) >= r[2].(float64) || r[1].(float64) >= r[3].(float64) || r[0].(float64) < 0 || r[2].(float64) > box[2].(float64) {
			c.fault("32000-1 12.5.2", "page %d: a link covers %v", i, r)
		}
		switch {
		case a["Dest"] != nil:
			c.destination(a["Dest"], fmt.Sprintf("page %d: a link", i))
		case c.at(a["A"])["S"] != nameValue("URI"):
			c.fault("19005-3 6.5.1", "page %d: a link does %v", i, c.at(a["A"])["S"])
		}
	}
	transparent := false
	for _, v := range c.at2(resources["ExtGState"]) {
		g := c.at(v)
		for _, k := range []string{"TR", "HTP", "HTO"} {
			if g[k] != nil {
				c.fault("19005-3 6.2.5", "a graphics state has /%s", k)
			}
		}
		if bm := g["BM"]; bm != nil && bm != nameValue("Normal") {
			c.fault("19005-3 6.2.10", "blend mode %v", bm)
		}
		if s := g["SMask"]; s != nil && s != nameValue("None") {
			c.fault("19005-3 6.2.10", "a soft mask")
		}
		transparent = true
	}
	if len(c.at2(resources["XObject"])) > 0 {
		c.fault("19005-3 6.2.8", "a picture in pixels, whose colours are not looked at here")
	}
	if transparent {
		if g := c.at2(d["Group"]); g != nil && g["CS"] != nameValue("DeviceRGB") {
			c.fault("19005-3 6.2.10", "page %d: transparency is blended in %v", i, g["CS"])
		}
	}
	c.draws(i, c.contents(d["Contents"]), resources)
}

// at2 is at for what may be missing.
func (c *checker) at2(v any) dict {
	if v == nil {
		return nil
	}
	return c.at(v)
}

func (c *checker) destination(v any, what string) (page int, top float64) {
	a := c.list(v)
	if len(a) == 5 {
		n, _ := a[0].(refValue)
		y, ok := a[3].(float64)
		if ok && a[1] == nameValue("XYZ") && c.at(a[0])["Type"] == nameValue("Page") {
			return int(n), y
		}
	}
	c.fault("32000-1 12.3.2", "%s leads to %v", what, a)
	return 0, 0
}

// outline looks at bookmarks and their chain.
func (c *checker) outline(v, parent any) int {
	if v == nil {
		return 0
	}
	d := c.at(v)
	if parent != nil {
		if s, _ := d["Title"].(string); strings.TrimSpace(decode(s)) == "" {
			c.fault("32000-1 12.3.3", "a bookmark without a title")
		}
		if d["Parent"] != parent {
			c.fault("32000-1 12.3.3", "a bookmark does not know its parent")
		}
		c.destination(d["Dest"], "a bookmark")
	}
	n := 0
	var before any
	for k := d["First"]; k != nil; n++ {
		e := c.at(k)
		if e["Prev"] != before || n > 1e5 {
			c.fault("32000-1 12.3.3", "the chain of bookmarks is broken")
			return n
		}
		c.outline(k, v)
		before, k = k, e["Next"]
	}
	if n > 0 && d["Last"] != before {
		c.fault("32000-1 12.3.3", "the last bookmark is not the last")
	}
	if count, _ := d["Count"].(float64); math.Abs(count) != float64(n) {
		c.fault("32000-1 12.3.3", "%d bookmarks, counted %v", n, d["Count"])
	}
	return n
}

func (c *checker) metadata() {
	n, _ := c.root["Metadata"].(refValue)
	v, xmp, _ := c.object(int(n))
	d, _ := v.(dict)
	if d["Type"] != nameValue("Metadata") || d["Subtype"] != nameValue("XML") || d["Filter"] != nil {
		c.fault("19005-3 6.6.2.1", "the metadata are not plain XML")
	}
	if !bytes.Contains(xmp, []byte("<pdfaid:part>3</pdfaid:part>")) || !bytes.Contains(xmp, []byte("<pdfaid:conformance>B</pdfaid:conformance>")) ||
		!bytes.Contains(xmp, []byte(`xmlns:pdfaid="http://www.aiim.org/pdfa/ns/id/"`)) {
		c.fault("19005-3 6.6.4", "the file does not say which part and level it follows")
	}
	for _, m := range regexp.MustCompile(`xmlns:(\w+)=`).FindAllSubmatch(xmp, -1) {
		if !slices.Contains([]string{"x", "rdf", "dc", "pdf", "xmp", "pdfaid"}, string(m[1])) {
			c.fault("19005-3 6.6.2.3", "properties of %s without their schema", m[1])
		}
	}
	info := c.at2(c.trailer["Info"])
	entity := strings.NewReplacer("&amp;", "&", "&lt;", "<", "&gt;", ">", "&#34;", `"`, "&#39;", "'")
	for _, k := range [][2]string{{"Title", `<dc:title><rdf:Alt><rdf:li xml:lang="x-default">`}, {"Author", "<dc:creator><rdf:Seq><rdf:li>"},
		{"Subject", `<dc:description><rdf:Alt><rdf:li xml:lang="x-default">`}, {"Keywords", "<pdf:Keywords>"}, {"Producer", "<pdf:Producer>"}} {
		_, after, has := strings.Cut(string(xmp), k[1])
		value, _, _ := strings.Cut(after, "<")
		s, _ := info[k[0]].(string)
		if has != (s != "") || entity.Replace(value) != decode(s) {
			c.fault("19005-3 6.6.3", "%s is %q and %q", k[0], decode(s), value)
		}
	}
	if info["Title"] == nil {
		c.fault("14289-1 7.1", "the file has no title")
	}
	if date, ok := info["CreationDate"].(string); ok {
		want := fmt.Sprintf("<xmp:CreateDate>%s-%s-%sT%s:%s:%sZ<", date[2:6], date[6:8], date[8:10], date[10:12], date[12:14], date[14:16])
		if !bytes.Contains(xmp, []byte(want)) {
			c.fault("19005-3 6.6.3", "the dates differ: %s", date)
		}
	}
}

func (c *checker) attached() {
	names := c.at2(c.root["Names"])
	for k := range names {
		if k != "EmbeddedFiles" {
			c.fault("19005-3 6.5", "there are names of %s", k)
		}
	}
	var list array
	if names["EmbeddedFiles"] != nil {
		list = c.list(c.at(names["EmbeddedFiles"])["Names"])
	}
	related := c.list(c.root["AF"])
	if 2*len(related) != len(list) {
		c.fault("19005-3 6.8", "%d files, %d of them related to the document", len(list)/2, len(related))
	}
	before := ""
	for i := 0; i+1 < len(list); i += 2 {
		if s, _ := list[i].(string); s <= before {
			c.fault("32000-1 7.9.6", "the names of files are not in order")
		} else {
			before = s
		}
		d := c.at(list[i+1])
		f, _ := d["F"].(string)
		uf, _ := d["UF"].(string)
		if f == "" || uf == "" || d["Type"] != nameValue("Filespec") {
			c.fault("19005-3 6.8", "a file without a name")
		}
		if !slices.Contains([]any{nameValue("Source"), nameValue("Data"), nameValue("Alternative"), nameValue("Supplement"), nameValue("Unspecified")}, d["AFRelationship"]) {
			c.fault("19005-3 6.8", "%s is related as %v", uf, d["AFRelationship"])
		}
		if !slices.Contains(related, list[i+1]) {
			c.fault("19005-3 6.8", "%s is related to nothing", uf)
		}
		s := c.at(c.at(d["EF"])["F"])
		if mime, _ := s["Subtype"].(nameValue); !strings.Contains(string(mime), "/") {
			c.fault("19005-3 6.8", "%s is of type %v", uf, s["Subtype"])
		}
		if p := c.at(s["Params"]); p["Size"] == nil || c.at2(c.trailer["Info"])["ModDate"] != nil && p["ModDate"] == nil {
			c.fault("19005-3 6.8", "%s lacks its size or date", uf)
		}
	}
}

// fontInfo is a face as the pages use it.
type fontInfo struct {
	unicode map[int]string
	width   map[int]float64
	glyphs  []byte // CIDToGIDMap
	advance func(glyph int) (float64, bool)
	known   map[int]bool // codes already looked at
}

func (c *checker) font(v any) *fontInfo {
	n, _ := v.(refValue)
	if f := c.fonts[int(n)]; f != nil {
		return f
	}
	f := &fontInfo{unicode: map[int]string{}, width: map[int]float64{}, known: map[int]bool{}}
	c.fonts[int(n)] = f
	d := c.at(v)
	name, _ := d["BaseFont"].(nameValue)
	if d["Subtype"] != nameValue("Type0") || d["Encoding"] != nameValue("Identity-H") {
		c.fault("19005-3 6.2.11.3.3", "%s is encoded as %v", name, d["Encoding"])
	}
	kin := c.at(c.list(d["DescendantFonts"])[0])
	system := c.at(kin["CIDSystemInfo"])
	if kin["Subtype"] != nameValue("CIDFontType2") || kin["BaseFont"] != d["BaseFont"] || system["Ordering"] == nil {
		c.fault("19005-3 6.2.11.3.1", "%s has a descendant %v", name, kin["BaseFont"])
	}
	about := c.at(kin["FontDescriptor"])
	if !regexp.MustCompile(`^[A-Z]{6}\+`).MatchString(string(name)) || about["FontName"] != d["BaseFont"] || about["CIDSet"] != nil {
		c.fault("32000-1 9.6.4", "%s is no subset by its name", name)
	}
	if about["FontFile2"] == nil {
		c.fault("19005-3 6.2.11.4.1", "%s is not embedded", name)
		return f
	}
	program := c.contents(about["FontFile2"])
	f.glyphs = c.contents(kin["CIDToGIDMap"])
	f.advance = advances(program)
	if f.advance == nil {
		c.fault("19005-3 6.2.11.4.1", "%s is no TrueType", name)
	}
	w := c.list(kin["W"])
	for i := 0; i+1 < len(w); {
		first := int(w[i].(float64))
		if list, ok := w[i+1].(array); ok {
			for k, v := range list {
				f.width[first+k] = v.(float64)
			}
			i += 2
			continue
		}
		for k := first; k <= int(w[i+1].(float64)); k++ {
			f.width[k] = w[i+2].(float64)
		}
		i += 3
	}
	c.unicode(f, string(name), string(c.contents(d["ToUnicode"])))
	return f
}

// unicode reads what the codes of a font mean.
func (c *checker) unicode(f *fontInfo, name, cmap string) {
	for _, block := range regexp.MustCompile(`(?s)(\d+) beginbfrange\n(.*?)endbfrange`).FindAllStringSubmatch(cmap, -1) {
		ranges := regexp.MustCompile(`<([0-9A-F]{4})> <([0-9A-F]{4})> <([0-9A-F]{4})>`).FindAllStringSubmatch(block[2], -1)
		if fmt.Sprint(len(ranges)) != block[1] || len(ranges) > 100 {
			c.fault("32000-1 9.10.3", "%s: %s ranges announced, %d there", name, block[1], len(ranges))
		}
		for _, r := range ranges {
			var low, high, to int
			fmt.Sscanf(r[1]+" "+r[2]+" "+r[3], "%X %X %X", &low, &high, &to)
			if low>>8 != high>>8 || high < low || to&255+high-low > 255 {
				c.fault("32000-1 9.10.3", "%s: the range %s to %s crosses a byte", name, r[1], r[2])
			}
			for code := low; code <= high; code++ {
				if u := to + code - low; u == 0 || u == 0xFEFF || u == 0xFFFE || 0xD800 <= u && u < 0xE000 {
					c.fault("19005-3 6.2.11.7.2", "%s: code %04X means %04X", name, code, u)
				} else {
					f.unicode[code] = string(rune(u))
				}
			}
		}
	}
}

// advances reads the widths of glyphs, in thousandths of an em, out of a TrueType font.
func advances(program []byte) func(int) (float64, bool) {
	if len(program) < 12 {
		return nil
	}
	table := map[string][]byte{}
	for i := range int(binary.BigEndian.Uint16(program[4:])) {
		e := program[12+16*i:]
		at, size := int(binary.BigEndian.Uint32(e[8:])), int(binary.BigEndian.Uint32(e[12:]))
		if at+size > len(program) {
			return nil
		}
		table[string(e[:4])] = program[at : at+size]
	}
	head, hhea, hmtx, maxp := table["head"], table["hhea"], table["hmtx"], table["maxp"]
	if len(head) < 54 || len(hhea) < 36 || len(maxp) < 6 || table["glyf"] == nil || table["loca"] == nil {
		return nil
	}
	em, long := float64(binary.BigEndian.Uint16(head[18:])), int(binary.BigEndian.Uint16(hhea[34:]))
	glyphs := int(binary.BigEndian.Uint16(maxp[4:]))
	return func(g int) (float64, bool) {
		if g >= glyphs {
			return 0, false
		}
		k := min(g, long-1)
		if 4*k+2 > len(hmtx) {
			return 0, false
		}
		return float64(binary.BigEndian.Uint16(hmtx[4*k:])) / em * 1000, true
	}
}

// show reads a string of codes and looks at their glyphs.
func (c *checker) show(f *fontInfo, s string, page int) string {
	var b strings.Builder
	for i := 0; i+1 < len(s); i += 2 {
		code := int(s[i])<<8 | int(s[i+1])
		b.WriteString(f.unicode[code])
		if f.known[code] {
			continue
		}
		f.known[code] = true
		if f.unicode[code] == "" {
			c.fault("19005-3 6.2.11.7, 14289-1 7.21.7", "page %d: code %04X has no meaning", page, code)
		}
		if 2*code+1 >= len(f.glyphs) {
			c.fault("19005-3 6.2.11.3.2", "page %d: code %04X has no glyph", page, code)
			continue
		}
		glyph := int(f.glyphs[2*code])<<8 | int(f.glyphs[2*code+1])
		if glyph == 0 {
			c.fault("19005-3 6.2.11.8", "page %d: code %04X shows .notdef", page, code)
		}
		if have, ok := f.advance(glyph); !ok || math.Abs(have-f.width[code]) > 1 {
			c.fault("19005-3 6.2.11.5", "page %d: code %04X is %v wide in the font and %v in the file", page, code, have, f.width[code])
		}
	}
	return b.String()
}

var paints = map[string]bool{"S": true, "s": true, "f": true, "F": true, "f*": true, "B": true, "B*": true, "b": true, "b*": true,
	"Tj": true, "TJ": true, "'": true, `"`: true, "Do": true, "sh": true, "BI": true}

var states = map[string]bool{"q": true, "Q": true, "cm": true, "w": true, "J": true, "j": true, "M": true, "d": true, "gs": true,
	"m": true, "l": true, "c": true, "v": true, "y": true, "h": true, "re": true, "n": true, "BT": true, "ET": true, "Tf": true, "Td": true,
	"Tm": true, "Tc": true, "Tw": true, "TL": true, "Tr": true, "Ts": true, "g": true, "G": true, "rg": true, "RG": true}

// draws reads the operators of a page: what each paints must be marked.
func (c *checker) draws(page int, data []byte, resources dict) {
	p := &parser{data: data}
	var args []any
	type mark struct {
		mcid     int
		artifact bool
		actual   bool
	}
	var open []mark
	var font *fontInfo
	depth := 0
	write := func(s string) {
		for _, m := range open {
			if m.actual {
				return
			}
		}
		for _, m := range open {
			if m.mcid >= 0 {
				c.text[[2]int{page, m.mcid}] += s
			}
		}
	}
	for {
		p.skip()
		if p.at >= len(p.data) {
			break
		}
		v, err := p.value(0)
		if err != nil {
			c.fault("32000-1 7.8.2", "page %d cannot be read at %d", page, p.at)
			return
		}
		op, ok := v.(word)
		if !ok || op == "true" || op == "false" || op == "null" {
			args = append(args, v)
			continue
		}
		switch {
		case op == "BDC" || op == "BMC":
			tag, _ := args[0].(nameValue)
			m := mark{mcid: -1, artifact: tag == "Artifact"}
			inside := false // content of an element, or an artifact, is open
			for _, o := range open {
				inside = inside || o.artifact || o.mcid >= 0
			}
			if op == "BDC" {
				d := c.at(args[1])
				if id, ok := d["MCID"].(float64); ok {
					m.mcid = int(id)
					c.tags[[2]int{page, m.mcid}] = string(tag)
					if m.mcid != c.count[page] {
						c.fault("32000-1 14.7.4.2", "page %d: content %d comes behind %d", page, m.mcid, c.count[page]-1)
					}
					c.count[page]++
				}
				if s, ok := d["ActualText"].(string); ok {
					m.actual = true
					if m.mcid >= 0 {
						c.text[[2]int{page, m.mcid}] = decode(s)
					}
				}
			}
			if inside && (m.artifact || m.mcid >= 0 || !open[0].artifact) {
				c.fault("14289-1 7.1", "page %d: %s inside other content", page, tag)
			}
			open = append(open, m)
		case op == "EMC":
			if len(open) == 0 {
				c.fault("32000-1 14.6", "page %d: more ends than beginnings", page)
				return
			}
			open = open[:len(open)-1]
		case paints[string(op)]:
			marked := false
			for _, m := range open {
				marked = marked || m.artifact || m.mcid >= 0
			}
			if !marked {
				c.fault("14289-1 7.1", "page %d: %s %v is neither content nor artifact", page, op, args)
			}
			if op == "TJ" || op == "Tj" {
				if font == nil {
					c.fault("32000-1 9.3", "page %d: text without a font", page)
					return
				}
				list, ok := args[len(args)-1].(array)
				if !ok {
					list = array{args[len(args)-1]}
				}
				for _, v := range list {
					if s, ok := v.(string); ok {
						write(c.show(font, s, page))
					}
				}
			}
		case op == "Tf":
			name, _ := args[0].(nameValue)
			if v := c.at(resources["Font"])[string(name)]; v != nil {
				font = c.font(v)
			} else {
				c.fault("19005-3 6.2.2", "page %d: font %s is no resource", page, name)
			}
		case op == "gs":
			name, _ := args[0].(nameValue)
			if c.at(resources["ExtGState"])[string(name)] == nil {
				c.fault("19005-3 6.2.2", "page %d: graphics state %s is no resource", page, name)
			}
		case op == "q":
			if depth++; depth > 28 {
				c.fault("19005-3 6.1.13", "page %d: states nest too deeply", page)
			}
		case op == "Q":
			depth--
		case !states[string(op)]:
			c.fault("19005-3 6.2.2, 6.2.4.3", "page %d: operator %s", page, op)
		}
		args = args[:0]
	}
	if len(open) != 0 || depth != 0 {
		c.fault("32000-1 14.6", "page %d ends inside marked content or a state", page)
	}
}

// What an element may hold (ISO 32000-1, clause 14.8.4; ISO 14289-1, clause 7.2 to 7.9).
var holds = map[string]string{
	"Table": "Caption TR", "TR": "TH TD", "L": "LI", "LI": "Lbl LBody", "TOC": "TOCI TOC", "TOCI": "Reference Span Link",
	"H1": "Span Link Reference", "H2": "Span Link Reference", "H3": "Span Link Reference", "H4": "Span Link Reference", "H5": "Span Link Reference",
	"H6": "Span Link Reference", "P": "Span Link Reference Code", "Caption": "Span Link Reference", "Lbl": "Span Link Reference",
	"Code": "Span", "TH": "Span Link Reference", "TD": "Span Link Reference", "Link": "Span", "Reference": "Link", "Span": "Span", "Figure": "",
	"Document": "Sect Div BlockQuote L P H1 H2 H3 H4 H5 H6 Table Caption Figure Note TOC",
	"Sect":     "Sect Div BlockQuote L P H1 H2 H3 H4 H5 H6 Table Caption Figure Note TOC", "Div": "Caption",
	"BlockQuote": "Sect Div BlockQuote L P H1 H2 H3 H4 H5 H6 Table Caption Figure Note TOC",
	"LBody":      "Sect Div BlockQuote L P H1 H2 H3 H4 H5 H6 Table Caption Figure Note TOC",
	"Note":       "Lbl Sect Div BlockQuote L P Table Caption Figure Note TOC",
}

func (c *checker) structureTree() {
	top := c.at(c.root["StructTreeRoot"])
	if top["Type"] != nameValue("StructTreeRoot") {
		c.fault("32000-1 14.7.2", "there is no structure")
		return
	}
	nums := c.list(c.at(top["ParentTree"])["Nums"])
	last := -1.0
	for i := 0; i+1 < len(nums); i += 2 {
		k, _ := nums[i].(float64)
		if k <= last {
			c.fault("32000-1 7.9.7", "the numbers of the parent tree are not in order")
		}
		last = k
		c.parent[int(k)] = nums[i+1]
	}
	if next, _ := top["ParentTreeNextKey"].(float64); next <= last {
		c.fault("32000-1 14.7.2", "the next key of the parent tree is %v", next)
	}
	if len(c.list(top["K"])) > 0 {
		c.fault("14289-1 7.1", "more than one element is at the top")
	}
	notes := map[string]int{}
	c.tree = c.element(top["K"], c.root["StructTreeRoot"], 0, notes)
	if c.tree.Kind != "Document" {
		c.fault("32000-1 14.8.4.2", "the whole is a %s", c.tree.Kind)
	}
	ids := c.list(c.at2(top["IDTree"])["Names"])
	if len(ids) != 2*len(notes) {
		c.fault("32000-1 14.7.2", "%d notes, %d of them in the tree of identifiers", len(notes), len(ids)/2)
	}
	before := ""
	for i := 0; i+1 < len(ids); i += 2 {
		s, _ := ids[i].(string)
		n, _ := ids[i+1].(refValue)
		if s <= before || notes[s] != int(n) {
			c.fault("14289-1 7.9", "the note %q is element %d", s, n)
		}
		before = s
	}
	for i, n := range c.pages {
		d := c.at(refValue(n))
		if c.count[i] == 0 {
			continue
		}
		key, ok := d["StructParents"].(float64)
		list := c.list(c.parent[int(key)])
		if !ok || len(list) != c.count[i] {
			c.fault("32000-1 14.7.4.4", "page %d: %d pieces of content, %d of them with a parent", i, c.count[i], len(list))
			continue
		}
		for k, v := range list {
			if at := c.seen[[2]int{i, k}]; at == 0 || refValue(at) != v {
				c.fault("32000-1 14.7.4.4", "page %d: content %d belongs to element %d, says the structure, to %v, say the pages", i, k, at, v)
			}
		}
	}
	for n, page := range c.annots {
		key, _ := c.at(refValue(n))["StructParent"].(float64)
		if at := c.linked[n]; at == 0 || c.parent[int(key)] != refValue(at) {
			c.fault("32000-1 14.7.4.4", "page %d: link %d belongs to element %d, says the structure, to %v, say the pages", page, n, at, c.parent[int(key)])
		}
	}
	c.headings(c.tree)
}

// headings looks at the order of headings.
func (c *checker) headings(top *Struct) {
	before := 0
	var walk func(s *Struct)
	walk = func(s *Struct) {
		var level int
		if n, _ := fmt.Sscanf(s.Kind, "H%d", &level); n == 1 {
			if level > before+1 {
				c.fault("14289-1 7.4.2", "H%d behind H%d: %q", level, before, s.Text)
			}
			before = level
		}
		for _, k := range s.Kids {
			walk(k)
		}
	}
	walk(top)
}

func (c *checker) element(v, parent any, depth int, notes map[string]int) *Struct {
	n, _ := v.(refValue)
	d := c.at(v)
	kind, _ := d["S"].(nameValue)
	s := &Struct{Kind: string(kind), object: int(n), Span: 1, page: -1}
	allowed, known := holds[s.Kind]
	switch {
	case !known:
		c.fault("32000-1 14.8.4", "an element %q", kind)
	case d["P"] != parent:
		c.fault("32000-1 14.7.2", "%s %d does not know its parent", kind, n)
	case depth > 300:
		c.fault("32000-1 14.7.2", "elements nest too deeply")
		return s
	}
	if a := c.at2(d["A"]); a != nil {
		s.box = nil
		for _, v := range c.list(a["BBox"]) {
			f, _ := v.(float64)
			s.box = append(s.box, f)
		}
		if name, ok := a["Scope"].(nameValue); ok {
			s.Scope = string(name)
		}
		if f, ok := a["ColSpan"].(float64); ok {
			s.Span = int(f)
		}
		if s.Kind == "L" && a["ListNumbering"] == nil {
			c.fault("14289-1 7.6", "a list with labels does not say how it is numbered")
		}
	}
	if alt, ok := d["Alt"].(string); ok {
		s.Alt = decode(alt)
	}
	if id, ok := d["ID"].(string); ok {
		s.ID = id
		if notes[id] != 0 {
			c.fault("14289-1 7.9", "two notes are %q", id)
		}
		notes[id] = int(n)
	}
	if pg, ok := d["Pg"].(refValue); ok {
		at, ok := c.index[int(pg)]
		if !ok {
			c.fault("32000-1 14.7.4.2", "%s %d stands on no page", kind, n)
		}
		s.page = at
	}
	kids := c.list(d["K"])
	if kids == nil && d["K"] != nil {
		kids = array{d["K"]}
	}
	take := func(page, mcid int) {
		key := [2]int{page, mcid}
		if c.seen[key] != 0 || page < 0 || mcid >= c.count[page] {
			c.fault("32000-1 14.7.4.2", "%s %d has content %v, which another has or nobody", kind, n, key)
		}
		if tag := c.tags[key]; tag != s.Kind && !(tag == "Link" && s.Kind == "Span") {
			c.fault("32000-1 14.8.4", "%s %d has content marked as %s", kind, n, tag)
		}
		c.seen[key] = int(n)
		s.content = true
		s.Text += c.text[key]
	}
	for _, k := range kids {
		switch k := k.(type) {
		case float64:
			take(s.page, int(k))
			continue
		case dict:
			pg, _ := k["Pg"].(refValue)
			switch k["Type"] {
			case nameValue("MCR"):
				f, _ := k["MCID"].(float64)
				take(c.index[int(pg)], int(f))
			case nameValue("OBJR"):
				o, _ := k["Obj"].(refValue)
				if page, ok := c.annots[int(o)]; !ok || c.linked[int(o)] != 0 || c.index[int(pg)] != page {
					c.fault("32000-1 14.7.4.3", "%s %d has link %d, which another has or nobody", kind, n, o)
				}
				c.linked[int(o)] = int(n)
				s.links = append(s.links, int(o))
			}
			continue
		}
		kid := c.element(k, v, depth+1, notes)
		s.Kids = append(s.Kids, kid)
		if known && !slices.Contains(strings.Fields(allowed), kid.Kind) {
			c.fault("32000-1 14.8.4", "%s in %s", kid.Kind, kind)
		}
		if inline[kid.Kind] {
			s.Text += kid.Text
		}
	}
	c.kinds(s)
	return s
}

// kinds looks at what elements of some kinds must have.
func (c *checker) kinds(s *Struct) {
	if s.content && !Leaves[s.Kind] && !inline[s.Kind] {
		c.fault("32000-1 14.8.4", "%s has text of its own: %q", s.Kind, s.Text)
	}
	switch s.Kind {
	case "Table":
		width := -1
		for i, k := range s.Kids {
			if k.Kind == "Caption" {
				if i > 0 && i < len(s.Kids)-1 {
					c.fault("32000-1 14.8.4.3.4", "a caption in the middle of a table")
				}
				continue
			}
			n := 0
			for _, cell := range k.Kids {
				n += cell.Span
			}
			if width >= 0 && n != width {
				c.fault("14289-1 7.5", "a table with rows of %d and %d cells", width, n)
			}
			width = n
		}
	case "TH":
		if s.Scope != "Column" && s.Scope != "Row" && s.Scope != "Both" {
			c.fault("14289-1 7.5", "the head %q is of %q", s.Text, s.Scope)
		}
	case "Figure":
		if strings.TrimSpace(s.Alt) == "" {
			c.fault("14289-1 7.3", "a figure without words")
		}
		if len(s.box) != 4 || s.box[0] > s.box[2] || s.box[1] > s.box[3] || s.page < 0 {
			c.fault("32000-1 14.8.5.4.3", "a figure in %v", s.box)
		}
	case "Link":
		if len(s.links) == 0 {
			c.fault("14289-1 7.18.5", "a link that leads nowhere: %q", s.Text)
		}
	case "Note":
		if s.ID == "" {
			c.fault("14289-1 7.9", "a note without an identifier")
		}
	case "LI", "L", "TR", "TOC", "Reference", "Sect", "BlockQuote":
		if len(s.Kids) == 0 {
			c.fault("32000-1 14.8.4", "an empty %s", s.Kind)
		}
	}
}

// Plain gives the file as earlier releases wrote it, each object by itself and the
// table in plain text, its streams unpacked, and old replaced wherever it stands.
func Plain(file []byte, old, with string) ([]byte, error) {
	r, err := open(file)
	if err != nil {
		return nil, err
	}
	bodies := map[int][]byte{}
	for _, m := range regexp.MustCompile(`(?sm)^(\d+) 0 obj\n(.*?)\nendobj\n`).FindAllSubmatch(Expand(file)[len(file):], -1) {
		n, _ := strconv.Atoi(string(m[1]))
		bodies[n] = m[2]
	}
	for n, at := range r.offsets {
		v, raw, err := r.object(n)
		if err != nil {
			return nil, err
		}
		d, _ := v.(dict)
		if d["Type"] == nameValue("ObjStm") || d["Type"] == nameValue("XRef") {
			continue
		}
		head, _, _ := bytes.Cut(file[at:], []byte("stream\n"))
		_, head, _ = bytes.Cut(head, []byte("obj\n"))
		text := string(head)
		if d["Type"] != nameValue("EmbeddedFile") {
			if raw, err = r.unpack(d, raw); err != nil {
				return nil, err
			}
			text = strings.Replace(text, "/Filter /FlateDecode", "", 1)
			raw = bytes.ReplaceAll(raw, []byte(old), []byte(with))
		}
		text = regexp.MustCompile(`/Length \d+`).ReplaceAllString(text, fmt.Sprintf("/Length %d", len(raw)))
		bodies[n] = fmt.Appendf(nil, "%sstream\n%s\nendstream", strings.ReplaceAll(text, old, with), raw)
	}
	out := []byte("%PDF-1.7\n%\xE2\xE3\xCF\xD3\n")
	numbers := slices.Sorted(maps.Keys(bodies))
	size := numbers[len(numbers)-1] + 1
	offsets := make([]int, size)
	for _, n := range numbers {
		body := bodies[n]
		if !bytes.Contains(body, []byte("stream\n")) {
			body = bytes.ReplaceAll(body, []byte(old), []byte(with))
		}
		offsets[n] = len(out)
		out = fmt.Appendf(out, "%d 0 obj\n%s\nendobj\n", n, body)
	}
	table := len(out)
	out = fmt.Appendf(out, "xref\n0 %d\n0000000000 65535 f \n", size)
	for _, at := range offsets[1:] {
		kind := 'n'
		if at == 0 {
			kind = 'f'
		}
		out = fmt.Appendf(out, "%010d 00000 %c \n", at, kind)
	}
	id := r.trailer["ID"].(array)
	return fmt.Appendf(out, "trailer\n<</Size %d /Root %d 0 R /Info %d 0 R /ID [<%x> <%x>]>>\nstartxref\n%d\n%%%%EOF\n",
		size, r.trailer["Root"], r.trailer["Info"], id[0], id[1], table), nil
}
