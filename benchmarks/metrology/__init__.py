"""Parts of the metrology of features: reference pulses, and the pages that its findings are written on."""
