-- SPDX-License-Identifier: Apache-2.0
-- The Rabi frequency of the ensemble's mean beside its peak. Pulse lengths and the track follow the mean, on which candidate
-- dynamics agree where their peaks differ. Every earlier fit was of one coupling for all, mean and peak alike.
ALTER TABLE event ADD COLUMN rabi_mean_hz REAL;
ALTER TABLE event ADD COLUMN rabi_mean_sigma_hz REAL;
UPDATE event SET rabi_mean_hz = rabi_hz, rabi_mean_sigma_hz = rabi_sigma_hz;
PRAGMA user_version = 2;
