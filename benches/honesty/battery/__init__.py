"""Problems with known answers, and how often Steelyard's intervals and verdicts are right."""
