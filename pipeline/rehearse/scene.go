package rehearse

import "mirrorloom/pipeline/scene"

// What a scene is made of; see package scene.
type (
	Scene      = scene.Scene
	Source     = scene.Source
	Line       = scene.Line
	Velocity   = scene.Velocity
	Sky        = scene.Sky
	SkyLine    = scene.SkyLine
	Atmosphere = scene.Atmosphere
	RefStar    = scene.RefStar
)

// The kinds of sources.
const (
	KindStar     = scene.KindStar
	KindGaussian = scene.KindGaussian
	KindRing     = scene.KindRing
	KindGalaxy   = scene.KindGalaxy
)

// SceneNames, LoadScene and ParseScene are those of package scene.
var (
	SceneNames = scene.Names
	LoadScene  = scene.Load
	ParseScene = scene.Parse
)
