"""Files a person keeps: pictures, calibrations, readings, frames with their truth."""
