package replay

import (
	"net/url"
	"path"
	"strconv"
	"strings"

	"example.org/guardring/pkg/reduce"
)

// Entities of an RO-Crate (RO-Crate Metadata Specification 1.1). Required, and
// checked by checkCrate: a metadata file descriptor with @id
// ro-crate-metadata.json, @type CreativeWork and about ("RO-Crate Metadata File
// Descriptor"); a root data entity of @type Dataset whose @id ends with / and which
// has name, description, datePublished and license ("Direct properties of the Root
// Data Entity"); hasPart with every file, each of @type File with its @id a
// relative URI ("Data Entities"). sha256 is schema.org's, added to the context as
// the appendix "Extending RO-Crate" shows.
type entity map[string]any

const (
	crateContext = "https://w3id.org/ro/crate/1.1/context"
	crateVersion = "https://w3id.org/ro/crate/1.1"
	sha256Term   = "https://schema.org/sha256"
)

func ref(id string) entity { return entity{"@id": id} }

// crate writes the metadata. encoding/json sorts the keys.
func (p *Package) crate(s PackSettings) ([]byte, error) {
	root := entity{"@id": "./", "@type": "Dataset", "name": p.Title, "description": p.description(), "datePublished": p.Date}
	words := entity{"@id": "#license", "@type": "CreativeWork", "name": "No licence is stated",
		"description": "Whoever made the pack has stated no licence: ask before using it for more than checking the result."}
	switch {
	case isURL(s.License):
		words = entity{"@id": s.License, "@type": "CreativeWork", "name": s.License, "description": "The licence at " + s.License}
	case s.License != "":
		words = entity{"@id": "#license", "@type": "CreativeWork", "name": s.License, "description": "Licence: " + s.License}
	}
	root["license"] = ref(words["@id"].(string))
	graph := []entity{
		{"@id": crateFile, "@type": "CreativeWork", "conformsTo": ref(crateVersion), "about": ref("./")},
		root, words,
	}
	var parts, inputs, results []entity
	var files []entity
	for _, f := range p.Files {
		id := fileID(f.Name)
		parts = append(parts, ref(id))
		files = append(files, entity{"@id": id, "@type": "File", "name": path.Base(f.Name), "contentSize": strconv.Itoa(f.Bytes),
			"encodingFormat": mediaType(f.Name), "sha256": f.SHA256})
		switch f.role {
		case roleInput:
			inputs = append(inputs, ref(id))
		case roleResult, roleNotebook:
			results = append(results, ref(id))
		}
	}
	root["hasPart"] = parts
	if p.Main != "" {
		root["mainEntity"] = ref(fileID(p.Main))
	}
	graph = append(graph, files...)
	// How the results were made ("Software used to create files").
	tool := entity{"@id": "#guardring", "@type": "SoftwareApplication", "name": "guardring", "version": reduce.Version}
	graph = append(graph, tool)
	if len(results) > 0 {
		run := entity{"@id": "#run", "@type": "CreateAction", "name": "Reduction", "instrument": ref("#guardring"), "result": results}
		if len(inputs) > 0 {
			run["object"] = inputs
		}
		graph = append(graph, run)
	}
	return indented(entity{"@context": []any{crateContext, entity{"sha256": sha256Term}}, "@graph": graph})
}

// fileID is the relative URI of a file (RFC 3986).
func fileID(name string) string {
	parts := strings.Split(name, "/")
	for i, s := range parts {
		parts[i] = url.PathEscape(s)
	}
	id := strings.Join(parts, "/")
	if strings.Contains(parts[0], ":") { // a colon would end a scheme (RFC 3986 4.2)
		id = "./" + id
	}
	return id
}
