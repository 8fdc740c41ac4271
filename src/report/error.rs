//! Why a picture or page could not be made.

/// Failures of drawing; none of them depends on the values shown.
#[derive(Debug, thiserror::Error)]
pub enum ReportError {
    /// The drawing library refused.
    #[error("drawing \"{figure}\" failed: {reason}")]
    Drawing {
        /// Title of the figure.
        figure: String,
        /// As the library says it.
        reason: String,
    },
    /// The image encoder refused.
    #[error("encoding \"{figure}\" as PNG failed: {source}")]
    Encoding {
        /// Title of the figure.
        figure: String,
        /// As the encoder says it.
        source: png::EncodingError,
    },
}
