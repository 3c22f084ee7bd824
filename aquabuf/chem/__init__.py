"""Facts of water chemistry: constants, activity, acids, ions, gases. Nothing is solved here."""
