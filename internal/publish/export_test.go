package publish

// What the tests outside the package need of its inside.
const (
	TemporaryPrefix = temporaryPrefix
	QuickSpan       = quickSpan
)

var (
	ManifestOf  = manifestOf
	SnapshotDir = snapshotDir
)
