//! From verdicts to signals: windows in belt millimetres, then messages with the moment at which they are due.
