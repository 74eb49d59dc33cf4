package pdf

import (
	"bytes"
	"compress/zlib"
	"crypto/md5"
	"encoding/binary"
	"encoding/hex"
	"encoding/xml"
	"errors"
	"fmt"
	"regexp"
	"slices"
	"sort"
	"strconv"
	"strings"
	"unicode/utf16"
	"unicode/utf8"

	"penwright/render/face"
	"penwright/render/page"
)

// finish makes the file that the drawing library wrote (release 1.16.2, whose bytes
// are known) into the one that is wanted: outline, links, language, metadata, output
// intent, attachments, identifier. Each change asserts that it found its place.
func finish(d *drawn, book *page.Book, m meta, files []Attachment) ([]byte, error) {
	objects, err := split(d.file)
	if err != nil {
		return nil, err
	}
	f := &finisher{objects: objects}
	if err := f.fonts(d.runes); err != nil {
		return nil, err
	}
	return f.finish(book, d.trees[0], m, files)
}

// finish does what remains once the fonts are done.
func (f *finisher) finish(book *page.Book, t *tree, m meta, files []Attachment) ([]byte, error) {
	f.book, f.tree, f.meta, f.links, f.files, f.names = book, t, m.printable(), make([][]int, len(book.Pages)), nil, nil
	// The library ends with the information and the catalog.
	f.catalog, f.info = len(f.objects)-1, len(f.objects)-2
	for _, step := range []func() error{
		f.pages,
		func() error { return f.attach(files) },
		f.root,
	} {
		if err := step(); err != nil {
			return nil, err
		}
	}
	return f.bytes(), nil
}

type finisher struct {
	objects       [][]byte // by number, each from its dictionary to before endobj; [0] is unused
	book          *page.Book
	tree          *tree
	links         [][]int // by page, the objects of its links
	meta          meta
	catalog, info int
	packer        *zlib.Writer // kept, since making one costs more than most streams
	files         []int        // of the file specifications
	names         []string
}

var errShape = errors.New("writing the PDF: the drawing library wrote a file of another shape than release 1.16.2 does")

// split cuts a file with a plain cross-reference table into the contents of its objects.
func split(file []byte) ([][]byte, error) {
	tail := bytes.LastIndex(file, []byte("startxref\n"))
	if tail < 0 {
		return nil, errShape
	}
	var table int
	if _, err := fmt.Sscanf(string(file[tail:]), "startxref\n%d", &table); err != nil || table < 0 || table >= tail {
		return nil, errShape
	}
	var count int
	if _, err := fmt.Sscanf(string(file[table:min(table+40, tail)]), "xref\n0 %d\n", &count); err != nil || count < 5 || count > len(file) {
		return nil, errShape
	}
	lines := bytes.SplitN(file[table:tail], []byte("\n"), count+3)
	if len(lines) < count+3 {
		return nil, errShape
	}
	type place struct{ number, offset int }
	places := make([]place, 0, count)
	for i := 1; i < count; i++ {
		field, _, _ := strings.Cut(string(lines[i+2]), " ")
		offset, err := strconv.Atoi(field)
		if err != nil || offset <= 0 || offset >= table {
			return nil, errShape
		}
		places = append(places, place{i, offset})
	}
	sort.Slice(places, func(i, j int) bool { return places[i].offset < places[j].offset })
	objects := make([][]byte, count)
	for i, p := range places {
		end := table
		if i+1 < len(places) {
			end = places[i+1].offset
		}
		body := file[p.offset:end]
		head := fmt.Sprintf("%d 0 obj\n", p.number)
		if !bytes.HasPrefix(body, []byte(head)) || !bytes.HasSuffix(body, []byte("\nendobj\n")) {
			return nil, errShape
		}
		objects[p.number] = body[len(head) : len(body)-len("\nendobj\n")]
	}
	return objects, nil
}

// add appends an object and gives its number.
func (f *finisher) add(body string) int {
	f.objects = append(f.objects, []byte(body))
	return len(f.objects) - 1
}

// stream appends an object with a stream; dict is what its dictionary holds besides
// length and filter.
func (f *finisher) stream(dict string, data []byte, compress bool) int {
	f.objects = append(f.objects, f.streamObject(dict, data, compress))
	return len(f.objects) - 1
}

func (f *finisher) streamObject(dict string, data []byte, compress bool) []byte {
	var b bytes.Buffer
	if compress {
		var z bytes.Buffer
		if f.packer == nil {
			f.packer = zlib.NewWriter(&z)
		}
		f.packer.Reset(&z)
		f.packer.Write(data) // a bytes.Buffer takes everything
		f.packer.Close()
		data = z.Bytes()
		dict += " /Filter /FlateDecode"
	}
	fmt.Fprintf(&b, "<<%s /Length %d>>\nstream\n", strings.TrimSpace(dict), len(data))
	b.Write(data)
	b.WriteString("\nendstream")
	return b.Bytes()
}

// replace changes the one place in an object where old stands.
func (f *finisher) replace(number int, old, with string) error {
	if number >= len(f.objects) || bytes.Count(f.objects[number], []byte(old)) != 1 {
		return errShape
	}
	f.objects[number] = bytes.Replace(f.objects[number], []byte(old), []byte(with), 1)
	return nil
}

// fonts names the subsets as such, and maps their codes to Unicode block by block: one
// range over all codes, as the library writes it, breaks the rules of such maps.
func (f *finisher) fonts(used map[string]*runeSet) error {
	found := 0
	for i := range f.objects {
		const mark = "<</Type /Font\n/Subtype /Type0\n/BaseFont /utf8"
		if !bytes.HasPrefix(f.objects[i], []byte(mark)) {
			continue
		}
		name, _, _ := strings.Cut(string(f.objects[i][len(mark):]), "\n")
		set := used[name]
		if set == nil {
			return errShape
		}
		found++
		old := "/utf8" + name + "\n"
		with := "/" + subsetName(name, set) + "\n"
		for _, n := range []int{i, i + 1, i + 4} {
			if err := f.replace(n, old, with); err != nil {
				return err
			}
		}
		if f.objects[i+2] == nil || !bytes.Contains(f.objects[i+2], []byte("begincmap")) {
			return errShape
		}
		f.objects[i+2] = f.streamObject("", toUnicode(set), true)
	}
	if found != len(used) {
		return errShape
	}
	return nil
}

// subsetName is the name of a face after the six letters that mark a subset.
func subsetName(name string, set *runeSet) string {
	var all []byte
	for _, v := range set {
		all = binary.BigEndian.AppendUint64(all, v)
	}
	sum := md5.Sum(all)
	tag := sum[:6]
	for i := range tag {
		tag[i] = 'A' + tag[i]%26
	}
	names := []string{"LiberationSerif", "LiberationSans", "LiberationMono", "DejaVuSans"}
	styles := []string{"", "-Italic", "-Bold", "-BoldItalic"}
	for i := 0; i < face.Count(); i++ {
		if faceAt(i).Name == name {
			return string(tag) + "+" + names[i/4] + styles[i%4]
		}
	}
	return string(tag) + "+" + name
}

// toUnicode maps the codes that are used to the runes that they are, in ranges within
// which only the last byte changes.
func toUnicode(set *runeSet) []byte {
	var ranges [][2]rune
	for r := rune(0); r <= 0xFFFF; r++ {
		switch n := len(ranges); {
		case r&63 == 0 && set[r>>6] == 0:
			r += 63
		case !set.has(r):
		case n > 0 && ranges[n-1][1] == r-1 && r&255 != 0:
			ranges[n-1][1] = r
		default:
			ranges = append(ranges, [2]rune{r, r})
		}
	}
	var b bytes.Buffer
	b.WriteString("/CIDInit /ProcSet findresource begin\n12 dict begin\nbegincmap\n" +
		"/CIDSystemInfo <</Registry (Adobe) /Ordering (UCS) /Supplement 0>> def\n" +
		"/CMapName /Adobe-Identity-UCS def\n/CMapType 2 def\n" +
		"1 begincodespacerange\n<0000> <FFFF>\nendcodespacerange\n")
	for part := range slices.Chunk(ranges, 100) {
		fmt.Fprintf(&b, "%d beginbfrange\n", len(part))
		for _, v := range part {
			fmt.Fprintf(&b, "<%04X> <%04X> <%04X>\n", v[0], v[1], v[0])
		}
		b.WriteString("endbfrange\n")
	}
	b.WriteString("endcmap\nCMapName currentdict /CMap defineresource pop\nend\nend\n")
	return b.Bytes()
}

// pageObject is the number of page i: the library writes page and content in turn.
func pageObject(i int) int { return 3 + 2*i }

// pages gives each page its links, and packs its contents.
func (f *finisher) pages() error {
	key := len(f.book.Pages) // of the page or link, by which its elements are found
	for i := range f.book.Pages {
		pg := &f.book.Pages[i]
		var refs []string
		for _, o := range pg.Ops {
			l, ok := o.(page.Link)
			if !ok {
				continue
			}
			n := f.add(f.link(pg, l, key))
			key++
			f.links[i] = append(f.links[i], n)
			refs = append(refs, fmt.Sprintf("%d 0 R", n))
		}
		extra := ""
		if len(f.tree.parents[i]) > 0 {
			extra = fmt.Sprintf("/StructParents %d\n", i)
		}
		if len(refs) > 0 {
			extra += "/Annots [" + strings.Join(refs, " ") + "]\n/Tabs /S\n"
		}
		if err := f.replace(pageObject(i), "<</Type /Page\n", "<</Type /Page\n"+extra); err != nil {
			return err
		}
		if err := f.pack(pageObject(i) + 1); err != nil {
			return err
		}
	}
	return nil
}

// pack compresses the stream of an object that the library left plain.
func (f *finisher) pack(number int) error {
	if number >= len(f.objects) {
		return errShape
	}
	head, body, ok := bytes.Cut(f.objects[number], []byte(">>\nstream\n"))
	if !ok || !bytes.HasPrefix(head, []byte("<</Length ")) || !bytes.HasSuffix(body, []byte("\nendstream")) {
		return errShape
	}
	f.objects[number] = f.streamObject("", bytes.TrimSuffix(body, []byte("\nendstream")), true)
	return nil
}

func (f *finisher) link(pg *page.Page, l page.Link, key int) string {
	rect := fmt.Sprintf("[%s]", numbers(l.X, pg.Height-l.Y-l.Height, l.X+l.Width, pg.Height-l.Y))
	action := ""
	if id, inside := strings.CutPrefix(l.Dest, "#"); inside {
		action = "/Dest " + f.dest(f.book.Anchors[id])
	} else {
		action = "/A <</S /URI /URI " + literal(uri(l.Dest)) + ">>"
	}
	what := ""
	if l.Element != nil {
		what = printable(l.Element.Alt)
	}
	if strings.TrimSpace(what) == "" {
		what = uri(l.Dest)
	}
	return fmt.Sprintf("<</Type /Annot /Subtype /Link /F 4 /Border [0 0 0] /StructParent %d /Rect %s /Contents %s %s>>",
		key, rect, textString(what), action)
}

func (f *finisher) dest(at page.Place) string {
	height := f.book.Pages[at.Page].Height
	return fmt.Sprintf("[%d 0 R /XYZ null %s null]", pageObject(at.Page), numbers(min(height-at.Y+12, height)))
}

func numbers(list ...float64) string {
	var b []byte
	for i, v := range list {
		if i > 0 {
			b = append(b, ' ')
		}
		b = number(b, v)
	}
	return string(b)
}

// uri keeps a URL to the bytes that one may have.
func uri(s string) string {
	var b strings.Builder
	for i := 0; i < len(s); i++ {
		if c := s[i]; c <= 0x20 || c >= 0x7F {
			fmt.Fprintf(&b, "%%%02X", c)
		} else {
			b.WriteByte(c)
		}
	}
	return b.String()
}

// literal writes an ASCII string.
func literal(s string) string {
	return "(" + strings.NewReplacer(`\`, `\\`, "(", `\(`, ")", `\)`, "\r", `\r`, "\n", `\n`).Replace(s) + ")"
}

// textString writes a string for a reader's eyes.
func textString(s string) string {
	s = strings.ToValidUTF8(s, "\uFFFD")
	if b := encoded(s); b != s {
		return "<" + strings.ToUpper(hex.EncodeToString([]byte(b))) + ">"
	}
	return literal(s)
}

// encoded gives the bytes that textString writes.
func encoded(s string) string {
	for i := 0; i < len(s); i++ {
		if c := s[i]; c < 0x20 || c >= 0x7F {
			b := []byte{0xFE, 0xFF}
			for _, u := range utf16.Encode([]rune(s)) {
				b = append(b, byte(u>>8), byte(u))
			}
			return string(b)
		}
	}
	return s
}

// key is what a file goes by in the tree of names. Readers look it up by halving and do
// not agree on the order of letters beyond ASCII, so there are none in it.
func key(s string) string {
	var b strings.Builder
	for i := 0; i < len(s); i++ {
		if c := s[i]; c < 0x20 || c >= 0x7F || c == '%' {
			fmt.Fprintf(&b, "%%%02X", c)
		} else {
			b.WriteByte(c)
		}
	}
	return b.String()
}

// name writes a name, its odd bytes as codes.
func name(s string) string {
	var b strings.Builder
	b.WriteByte('/')
	for i := 0; i < len(s); i++ {
		c := s[i]
		if c <= 0x20 || c >= 0x7F || strings.IndexByte("#/()<>[]{}%", c) >= 0 {
			fmt.Fprintf(&b, "#%02X", c)
		} else {
			b.WriteByte(c)
		}
	}
	return b.String()
}

// outline writes the bookmarks and gives the number of their root, 0 where there are none.
func (f *finisher) outline() int {
	entries := f.book.Outline
	if len(entries) == 0 {
		return 0
	}
	root := len(f.objects)
	type node struct {
		parent            int // index in nodes
		children          []int
		entry             page.Entry
		before, after, at int
	}
	nodes := []node{{at: root}}
	path := []int{0} // from the root to the entry before
	for i, e := range entries {
		for len(path) > 1 && nodes[path[len(path)-1]].entry.Level >= e.Level {
			path = path[:len(path)-1]
		}
		parent := path[len(path)-1]
		nodes = append(nodes, node{parent: parent, entry: e, at: root + 1 + i})
		nodes[parent].children = append(nodes[parent].children, len(nodes)-1)
		path = append(path, len(nodes)-1)
	}
	family := func(n *node) string {
		if len(n.children) == 0 {
			return ""
		}
		first, last := n.children[0], n.children[len(n.children)-1]
		return fmt.Sprintf(" /First %d 0 R /Last %d 0 R", nodes[first].at, nodes[last].at)
	}
	for i := range nodes {
		for k, c := range nodes[i].children {
			if k > 0 {
				nodes[c].before = nodes[nodes[i].children[k-1]].at
			}
			if k+1 < len(nodes[i].children) {
				nodes[c].after = nodes[nodes[i].children[k+1]].at
			}
		}
	}
	f.add(fmt.Sprintf("<</Type /Outlines%s /Count %d>>", family(&nodes[0]), len(nodes[0].children)))
	for i := 1; i < len(nodes); i++ {
		n := &nodes[i]
		body := fmt.Sprintf("<</Title %s /Parent %d 0 R%s", textString(n.entry.Title), nodes[n.parent].at, family(n))
		if n.before > 0 {
			body += fmt.Sprintf(" /Prev %d 0 R", n.before)
		}
		if n.after > 0 {
			body += fmt.Sprintf(" /Next %d 0 R", n.after)
		}
		if len(n.children) > 0 {
			body += fmt.Sprintf(" /Count -%d", len(n.children)) // closed
		}
		f.add(body + " /Dest " + f.dest(n.entry.Place) + ">>")
	}
	return root
}

// attach writes the files that ride along.
func (f *finisher) attach(files []Attachment) error {
	sorted := slices.Clone(files)
	slices.SortStableFunc(sorted, func(a, b Attachment) int { return strings.Compare(key(a.Name), key(b.Name)) })
	for i, a := range sorted {
		if a.Name == "" || !utf8.ValidString(a.Name) {
			return fmt.Errorf("attaching %q: a file needs a name in UTF-8", a.Name)
		}
		if i > 0 && sorted[i-1].Name == a.Name {
			return fmt.Errorf("attaching %q: two files have this name", a.Name)
		}
		relation := a.Relationship
		switch relation {
		case "":
			relation = "Unspecified"
		case "Source", "Data", "Alternative", "Supplement", "Unspecified":
		default:
			return fmt.Errorf("attaching %q: unknown relationship %q", a.Name, relation)
		}
		mime := a.MIME
		if mime == "" {
			mime = "application/octet-stream"
		}
		params := fmt.Sprintf("/Size %d", len(a.Data))
		if date := f.meta.date(); date != "" {
			params += " /ModDate " + date
		}
		sum := md5.Sum(a.Data)
		params += " /CheckSum <" + hex.EncodeToString(sum[:]) + ">"
		stream := f.stream("/Type /EmbeddedFile /Subtype "+name(mime)+" /Params <<"+params+">>", a.Data, true)
		spec := fmt.Sprintf("<</Type /Filespec /F %s /UF %s /EF <</F %d 0 R /UF %d 0 R>> /AFRelationship /%s",
			textString(a.Name), textString(a.Name), stream, stream, relation)
		if a.Description != "" {
			spec += " /Desc " + textString(a.Description)
		}
		f.files = append(f.files, f.add(spec+">>"))
		f.names = append(f.names, a.Name)
	}
	return nil
}

// language is the shape of a tag of a language, RFC 5646, section 2.1.
var language = regexp.MustCompile(`^[A-Za-z]{2,8}(-[A-Za-z0-9]{1,8})*$`)

// printable drops what metadata cannot hold.
func (m meta) printable() meta {
	for _, s := range []*string{&m.title, &m.author, &m.options.Subject, &m.options.Keywords, &m.options.Producer} {
		*s = printable(*s)
	}
	if !language.MatchString(m.lang) {
		m.lang = ""
	}
	return m
}

// date is the date of making as PDF writes it, empty where there is none.
func (m meta) date() string {
	if m.options.Date.IsZero() {
		return ""
	}
	return "(D:" + m.options.Date.UTC().Format("20060102150405") + "Z)"
}

// root writes information, metadata and catalog.
func (f *finisher) root() error {
	if !bytes.Contains(f.objects[f.catalog], []byte("/Type /Catalog\n")) ||
		!bytes.Contains(f.objects[f.info], []byte("/CreationDate")) {
		return errShape
	}
	m := f.meta
	var info strings.Builder
	info.WriteString("<<")
	for _, kv := range [][2]string{
		{"Title", m.title}, {"Author", m.author}, {"Subject", m.options.Subject},
		{"Keywords", m.options.Keywords}, {"Producer", m.options.Producer},
	} {
		if kv[1] != "" {
			fmt.Fprintf(&info, "/%s %s\n", kv[0], textString(kv[1]))
		}
	}
	if date := m.date(); date != "" {
		fmt.Fprintf(&info, "/CreationDate %s\n/ModDate %s\n", date, date)
	}
	info.WriteString(">>")
	f.objects[f.info] = []byte(info.String())

	xmp := f.stream("/Type /Metadata /Subtype /XML", m.xmp(), false)
	icc := f.stream("/N 3 /Alternate /DeviceRGB", profile(), true)
	intent := f.add(fmt.Sprintf("<</Type /OutputIntent /S /GTS_PDFA1 /OutputConditionIdentifier (sRGB IEC61966-2.1)"+
		" /Info (sRGB IEC61966-2.1) /DestOutputProfile %d 0 R>>", icc))
	outline := f.outline()
	structure := f.structure()

	var c strings.Builder
	c.WriteString("<</Type /Catalog /Pages 1 0 R /ViewerPreferences <</DisplayDocTitle true>>\n")
	if m.lang != "" {
		fmt.Fprintf(&c, "/Lang %s\n", textString(m.lang))
	}
	fmt.Fprintf(&c, "/Metadata %d 0 R /OutputIntents [%d 0 R]\n", xmp, intent)
	if outline > 0 {
		fmt.Fprintf(&c, "/Outlines %d 0 R /PageMode /UseOutlines\n", outline)
	}
	fmt.Fprintf(&c, "/MarkInfo <</Marked true>> /StructTreeRoot %d 0 R /PageLabels <</Nums [0 <</S /D>>]>>\n", structure)
	if len(f.files) > 0 {
		c.WriteString("/Names <</EmbeddedFiles <</Names [")
		for i, n := range f.files {
			fmt.Fprintf(&c, "%s %d 0 R ", literal(key(f.names[i])), n)
		}
		c.WriteString("]>>>>\n/AF [")
		for _, n := range f.files {
			fmt.Fprintf(&c, "%d 0 R ", n)
		}
		c.WriteString("]\n")
	}
	c.WriteString(">>")
	f.objects[f.catalog] = []byte(c.String())
	return nil
}

// printable drops what neither XML nor a reader's window takes.
func printable(s string) string {
	return strings.Map(func(r rune) rune {
		if r < 0x20 || 0x7F <= r && r < 0xA0 || r == 0xFFFE || r == 0xFFFF {
			return -1
		}
		return r
	}, strings.ToValidUTF8(s, "\uFFFD"))
}

// xmp is the metadata as XML, with the same values as the information.
func (m meta) xmp() []byte {
	text := func(s string) string {
		var b bytes.Buffer
		xml.EscapeText(&b, []byte(s)) // a bytes.Buffer takes everything
		return b.String()
	}
	var b bytes.Buffer
	b.WriteString("<?xpacket begin=\"\uFEFF\" id=\"W5M0MpCehiHzreSzNTczkc9d\"?>\n" +
		`<x:xmpmeta xmlns:x="adobe:ns:meta/"><rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#">` + "\n" +
		`<rdf:Description rdf:about="" xmlns:dc="http://purl.org/dc/elements/1.1/" xmlns:pdf="http://ns.adobe.com/pdf/1.3/"` +
		` xmlns:xmp="http://ns.adobe.com/xap/1.0/" xmlns:pdfaid="http://www.aiim.org/pdfa/ns/id/">` + "\n" +
		"<pdfaid:part>3</pdfaid:part><pdfaid:conformance>B</pdfaid:conformance>\n<dc:format>application/pdf</dc:format>\n")
	if m.title != "" {
		fmt.Fprintf(&b, "<dc:title><rdf:Alt><rdf:li xml:lang=\"x-default\">%s</rdf:li></rdf:Alt></dc:title>\n", text(m.title))
	}
	if m.author != "" {
		fmt.Fprintf(&b, "<dc:creator><rdf:Seq><rdf:li>%s</rdf:li></rdf:Seq></dc:creator>\n", text(m.author))
	}
	if m.options.Subject != "" {
		fmt.Fprintf(&b, "<dc:description><rdf:Alt><rdf:li xml:lang=\"x-default\">%s</rdf:li></rdf:Alt></dc:description>\n", text(m.options.Subject))
	}
	if m.lang != "" {
		fmt.Fprintf(&b, "<dc:language><rdf:Bag><rdf:li>%s</rdf:li></rdf:Bag></dc:language>\n", text(m.lang))
	}
	if m.options.Keywords != "" {
		fmt.Fprintf(&b, "<pdf:Keywords>%s</pdf:Keywords>\n", text(m.options.Keywords))
	}
	if m.options.Producer != "" {
		fmt.Fprintf(&b, "<pdf:Producer>%s</pdf:Producer>\n", text(m.options.Producer))
	}
	if !m.options.Date.IsZero() {
		date := m.options.Date.UTC().Format("2006-01-02T15:04:05Z")
		fmt.Fprintf(&b, "<xmp:CreateDate>%s</xmp:CreateDate><xmp:ModifyDate>%s</xmp:ModifyDate><xmp:MetadataDate>%s</xmp:MetadataDate>\n", date, date, date)
	}
	b.WriteString("</rdf:Description></rdf:RDF></x:xmpmeta>\n<?xpacket end=\"r\"?>\n")
	return b.Bytes()
}

// most is how many objects are packed together: a reader unpacks all for one. Ten
// times as many make the file no smaller.
const most = 100

// bytes writes the file: objects with a stream one by one, all others packed together
// in streams of objects, since those of the structure are many and alike (ISO 32000-1,
// clauses 7.5.7 and 7.5.8), and the table that tells where each is.
func (f *finisher) bytes() []byte {
	size := 0
	for _, o := range f.objects {
		size += len(o) + 48
	}
	b := make([]byte, 0, size+1024)
	// Four bytes above 127 tell programs that move files that this one is binary.
	b = append(b, "%PDF-1.7\n%\xE2\xE3\xCF\xD3\n"...)
	put := func(number int, body []byte) {
		b = strconv.AppendInt(b, int64(number), 10)
		b = append(b, " 0 obj\n"...)
		b = append(b, body...)
		b = append(b, "\nendobj\n"...)
	}
	// An entry of the table: kind, offset or stream of objects, index in that.
	type entry struct {
		kind, index int
		at          int
	}
	table := make([]entry, len(f.objects), len(f.objects)+len(f.objects)/most+2)
	var small []int
	for i := 1; i < len(f.objects); i++ {
		if !bytes.HasSuffix(f.objects[i], []byte("\nendstream")) {
			small = append(small, i)
			continue
		}
		table[i] = entry{kind: 1, at: len(b)}
		put(i, f.objects[i])
	}
	for group := range slices.Chunk(small, most) {
		var head, body []byte
		for k, i := range group {
			table[i] = entry{kind: 2, at: len(table), index: k}
			head = fmt.Appendf(head, "%d %d ", i, len(body))
			body = append(append(body, f.objects[i]...), '\n')
		}
		number := len(table)
		table = append(table, entry{kind: 1, at: len(b)})
		put(number, f.streamObject(fmt.Sprintf("/Type /ObjStm /N %d /First %d", len(group), len(head)), append(head, body...), true))
	}
	id := md5.Sum(b)
	start := len(b)
	table = append(table, entry{kind: 1, at: start})
	var rows []byte
	for _, e := range table {
		rows = append(rows, byte(e.kind))
		rows = binary.BigEndian.AppendUint32(rows, uint32(e.at))
		rows = binary.BigEndian.AppendUint16(rows, uint16(e.index))
	}
	binary.BigEndian.PutUint16(rows[5:], 65535) // as the first entry has it
	put(len(table)-1, f.streamObject(fmt.Sprintf("/Type /XRef /Size %d /W [1 4 2] /Root %d 0 R /Info %d 0 R /ID [<%x> <%x>]",
		len(table), f.catalog, f.info, id, id), rows, true))
	return fmt.Appendf(b, "startxref\n%d\n%%%%EOF\n", start)
}
