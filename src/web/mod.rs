//! Pages, pictures, the HTTP interface and the metrics, all from the snapshot and the history.
