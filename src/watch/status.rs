//! # The five words for a probe's condition (NAMUR NE 107)

crate::electrode::named::named! {
    /// Status of a probe, worst last. Source of the words: NAMUR NE 107 (from memory).
    Status, "status" {
        /// Valid.
        Good = "good",
        /// Still valid, but the wear reserve is nearly used.
        MaintenanceRequired = "maintenance required",
        /// Uncertain: outside permitted conditions, or a known deviation.
        OutOfSpecification = "out of specification",
        /// Temporarily invalid: somebody is working on it.
        FunctionCheck = "function check",
        /// Invalid: a fault of the device or its periphery.
        Failure = "failure",
    }
}
