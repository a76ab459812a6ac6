//! One readable function from a job and a time to a finished stage.
