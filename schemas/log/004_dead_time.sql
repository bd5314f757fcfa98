-- SPDX-License-Identifier: Apache-2.0
-- The dead time as a scan's points alone tell it, without what was known of it before: what a drive's history adds up. Of earlier fits
-- it is not known, for their dead times hold the prior they were fitted under.
ALTER TABLE event ADD COLUMN dead_time_points_s REAL;
ALTER TABLE event ADD COLUMN dead_time_points_sigma_s REAL;
PRAGMA user_version = 4;
