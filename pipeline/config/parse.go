package config

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"regexp"
	"strings"
	"unicode"
	"unicode/utf8"

	"go.yaml.in/yaml/v4"
	"go.yaml.in/yaml/v4/plugin/loaderlimits"
)

const (
	// maxBytes bounds the work that a text can cause: the longest
	// configuration, a scene of hundreds of sources, is tens of kilobytes.
	maxBytes = 1 << 20
	// maxDepth is well above the deepest key path of any document here (6).
	maxDepth = 24
)

// Doc is a parsed document: one mapping whose form has been checked, with the
// line of every key. A nil *Doc stands for a struct that comes from no file;
// its Errorf and Checks then name no line.
type Doc struct {
	name string
	root *yaml.Node
}

// Parse checks the form of a document; name is what errors call the file.
// Errors are of type *Error.
func Parse(name string, data []byte) (*Doc, error) {
	if len(data) > maxBytes {
		return nil, &Error{File: name, What: fmt.Sprintf("the file has %d bytes, more than a configuration may have (%d); give a smaller file", len(data), maxBytes)}
	}
	if err := checkText(name, data); err != nil {
		return nil, err
	}
	root, err := load(name, data)
	if err != nil {
		return nil, err
	}
	d := &Doc{name: name, root: root}
	if err := d.checkForm(root, ""); err != nil {
		return nil, err
	}
	return d, nil
}

// Name is the name given to Parse.
func (d *Doc) Name() string {
	if d == nil {
		return ""
	}
	return d.name
}

// checkText demands UTF-8 without control characters but tab and line ends: the
// library refuses most of them too, but does not say where.
func checkText(name string, data []byte) error {
	line := 1
	for i := 0; i < len(data); {
		r, size := utf8.DecodeRune(data[i:])
		switch {
		case r == utf8.RuneError && size <= 1:
			return &Error{File: name, Line: line, What: "the text is not UTF-8; save the file as UTF-8"}
		case r == '\n':
			line++
		case unicode.IsControl(r) && r != '\t' && r != '\r':
			return &Error{File: name, Line: line, What: fmt.Sprintf("the text holds the control character %U; delete it", r)}
		}
		i += size
	}
	return nil
}

// load runs the library over the text and returns the mapping at its root.
// The library reports by panics inside; those it lets out are recovered here.
func load(name string, data []byte) (root *yaml.Node, err error) {
	defer func() {
		if p := recover(); p != nil {
			root = nil
			err = &Error{File: name, What: fmt.Sprintf("the YAML library gave up on this text (%v); simplify the file", p)}
		}
	}()
	loader, err := yaml.NewLoader(bytes.NewReader(data),
		yaml.WithUniqueKeys(false), // checkForm names both lines of a duplicate
		yaml.WithPlugin(loaderlimits.New(loaderlimits.DepthValue(maxDepth))))
	if err != nil {
		return nil, &Error{File: name, What: fmt.Sprintf("the YAML library did not start: %v; report this", err), Err: err}
	}
	var doc yaml.Node
	if err := loader.Load(&doc); errors.Is(err, io.EOF) {
		return nil, &Error{File: name, Line: 1, What: "the document is empty; write its keys"}
	} else if err != nil {
		return nil, syntaxError(name, err)
	}
	var second yaml.Node
	if err := loader.Load(&second); err == nil {
		return nil, &Error{File: name, Line: second.Line, What: "a second document starts here; keep one document in a file"}
	} else if !errors.Is(err, io.EOF) {
		return nil, syntaxError(name, err)
	}
	return mappingOf(name, &doc)
}

func mappingOf(name string, doc *yaml.Node) (*yaml.Node, error) {
	if doc.Kind != yaml.DocumentNode || len(doc.Content) != 1 {
		return nil, &Error{File: name, Line: 1, What: "the document is empty; write its keys"}
	}
	root := doc.Content[0]
	switch {
	case root.Kind == yaml.MappingNode && len(root.Content) > 0:
		return root, nil
	case root.Kind == yaml.MappingNode, root.Kind == yaml.ScalarNode && root.Tag == "!!null":
		return nil, &Error{File: name, Line: max(root.Line, 1), What: "the document is empty; write its keys"}
	}
	return nil, &Error{File: name, Line: root.Line, What: fmt.Sprintf("the document is %s; write keys and values, one `key: value` a line", describe(root))}
}

func syntaxError(name string, err error) error {
	e := &Error{File: name, Err: err}
	text := err.Error()
	var load *yaml.LoadError
	if errors.As(err, &load) {
		e.Line = load.Mark.Line
		text = load.Message
		if load.ContextMsg != "" {
			text += " " + load.ContextMsg
		}
	}
	// The library's text may be of several lines; a refusal is one sentence.
	e.What = "not YAML (" + strings.Join(strings.Fields(text), " ") + "); mend the syntax there"
	return e
}

// word is what a key may look like: YAML keys of mirrorloom and the keys of
// its maps (such as the names of kinds) need no more.
var word = regexp.MustCompile(`^[A-Za-z][A-Za-z0-9_-]*$`)

// checkForm refuses, anywhere in the tree, what no document here may contain.
func (d *Doc) checkForm(n *yaml.Node, path string) error {
	switch {
	case n.Kind == yaml.AliasNode:
		return d.at(n.Line, path, "an alias (*%s) is not allowed; write the value out", short(n.Value))
	case n.Anchor != "":
		return d.at(n.Line, path, "an anchor (&%s) is not allowed; write the value out where it is needed", short(n.Anchor))
	case n.Style&yaml.TaggedStyle != 0:
		return d.at(n.Line, path, "an explicit tag (%s) is not allowed; write the plain value", short(n.Tag))
	case n.Kind == yaml.MappingNode:
		return d.checkMapping(n, path)
	case n.Kind == yaml.SequenceNode:
		for i, item := range n.Content {
			if err := d.checkForm(item, index(path, i)); err != nil {
				return err
			}
		}
	case n.Kind == yaml.ScalarNode && n.Tag == "!!null":
		return d.at(n.Line, path, "no value; give one or delete the key")
	}
	return nil
}

func (d *Doc) checkMapping(n *yaml.Node, path string) error {
	seen := make(map[string]int, len(n.Content)/2)
	for i := 0; i+1 < len(n.Content); i += 2 {
		key := n.Content[i]
		switch {
		case key.Kind == yaml.AliasNode || key.Anchor != "" || key.Style&yaml.TaggedStyle != 0:
			return d.at(key.Line, path, "a key with an anchor, an alias or a tag is not allowed; write the plain key")
		case key.Kind != yaml.ScalarNode:
			return d.at(key.Line, path, "a key is %s; write a plain word", describe(key))
		case key.Value == "<<":
			return d.at(key.Line, path, "a merge key (<<) is not allowed; write the keys out")
		case !word.MatchString(key.Value):
			return d.at(key.Line, path, "the key %q is no plain word; write letters, digits, _ and - only", short(key.Value))
		}
		full := join(path, key.Value)
		if first, ok := seen[key.Value]; ok {
			return d.at(key.Line, full, "the key stands here a second time, first on line %d; delete one of them", first)
		}
		seen[key.Value] = key.Line
		if err := d.checkForm(n.Content[i+1], full); err != nil {
			return err
		}
	}
	return nil
}

func (d *Doc) at(line int, path, format string, args ...any) error {
	return &Error{File: d.Name(), Line: line, Path: path, What: fmt.Sprintf(format, args...)}
}

// short keeps quoted input to a length that leaves the sentence readable.
func short(s string) string {
	const most = 40
	if utf8.RuneCountInString(s) <= most {
		return s
	}
	return string([]rune(s)[:most]) + "..."
}

// describe names a node for the "not ..." of a sentence.
func describe(n *yaml.Node) string {
	switch n.Kind {
	case yaml.MappingNode:
		return "a mapping"
	case yaml.SequenceNode:
		return "a list"
	case yaml.ScalarNode:
		// Plain text of several lines may hold line ends.
		if !plain(n) || strings.ContainsFunc(n.Value, unicode.IsControl) {
			return fmt.Sprintf("the text %q", short(n.Value))
		}
		return short(n.Value)
	}
	return "an alias"
}
