-- SPDX-License-Identifier: Apache-2.0
-- Scans of the drive amplitude (axis `amplitude`), and pulses whose amplitude is adjusted instead of their length.
PRAGMA user_version = 3;

ALTER TABLE event ADD COLUMN rabi_per_amplitude_hz REAL;        -- coupling over 2 pi per relative amplitude, at small amplitudes
ALTER TABLE event ADD COLUMN rabi_per_amplitude_sigma_hz REAL;
ALTER TABLE event ADD COLUMN compression REAL;                  -- part of the coupling lost at the scan's largest amplitude

-- Of a pulse whose amplitude is adjusted: that amplitude; its length_s is then NULL.
ALTER TABLE pulse ADD COLUMN amplitude REAL;
