/* SPDX-License-Identifier: MIT */
/*
 * How a station lives with its store, for station.c alone: it starts with one or without, goes on from memory when it fails, and takes it up
 * again with nothing lost of what memory holds.
 */
#ifndef FOREWATER_DAEMON_STATION_STORE_H
#define FOREWATER_DAEMON_STATION_STORE_H

#include "daemon/station.h"

/* The store and the picture that goes on from it. A disk that cannot be used is no failure: the station starts without one and says so.
 * FW_LOCKED, FW_FOREIGN, FW_NO_MEMORY. */
FW_MUST_CHECK enum fw_status station_store_open(struct station *station, struct fw_error *error);

/* The picture as the store has it, for the station's present settings; the one before is let go. */
FW_MUST_CHECK enum fw_status station_store_load(struct station *station, struct fw_error *error);

/* Says it, and marks the picture. The store stays open: it keeps the lock, and is opened anew before the next cycle. */
void station_store_trouble(struct station *station, const struct fw_error *error);

/* Tries to record again; what memory holds is written first. Trouble is told and survived. */
void station_store_heal(struct station *station);

#endif
