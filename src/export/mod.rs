//! Writers and readers of mesh files, on streams; they open no file themselves.
