/* SPDX-License-Identifier: MIT */
#include "daemon/settings/settings_keys.h"

#include <float.h>
#include <stdio.h>
#include <string.h>

#define OPTIONAL SETTINGS_OPTIONAL
#define WANTED SETTINGS_WANTED
#define FOR_RUN SETTINGS_WANTED_FOR_RUN
#define OBJECT(p, w, m)                                                                                              \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_OBJECT, .want = (w), .unit = "", .meaning = (m)                           \
    }
#define ARRAY(p, w, lo, hi, d, m)                                                                                    \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_ARRAY, .want = (w), .unit = "", .lowest = (lo), .highest = (hi),          \
        .fallback = (d), .meaning = (m)                                                                              \
    }
#define TEXT(p, w, hi, d, m)                                                                                         \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_TEXT, .want = (w), .unit = "", .lowest = 1, .highest = (hi),              \
        .fallback = (d), .meaning = (m)                                                                              \
    }
#define TEXT_OTHERWISE(p, hi, o, m)                                                                                  \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_TEXT, .unit = "", .lowest = 1, .highest = (hi), .otherwise = (o),         \
        .meaning = (m)                                                                                               \
    }
#define WORD(p, w, ws, d, m)                                                                                         \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_WORD, .want = (w), .unit = "", .words = (ws), .fallback = (d),            \
        .meaning = (m)                                                                                               \
    }
#define NAMES(p, r, m)                                                                                               \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_ID, .want = WANTED, .names = SETTINGS_REFER_##r, .unit = "",              \
        .highest = 63, .meaning = (m)                                                                                \
    }
#define NODE(p, m)                                                                                                   \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_ID, .want = WANTED, .unit = "", .highest = 63, .meaning = (m)             \
    }
#define REFERS(p, w, r, m)                                                                                           \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_ID, .want = (w), .refers = SETTINGS_REFER_##r, .unit = "", .highest = 63, \
        .meaning = (m)                                                                                               \
    }
#define NUMBER(p, w, u, lo, hi, d, m)                                                                                \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_NUMBER, .want = (w), .unit = (u), .lowest = (lo), .highest = (hi),        \
        .fallback = (d), .meaning = (m)                                                                              \
    }
#define INTEGER(p, w, u, lo, hi, d, m)                                                                               \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_INTEGER, .want = (w), .unit = (u), .lowest = (lo), .highest = (hi),       \
        .fallback = (d), .meaning = (m)                                                                              \
    }
#define OTHERWISE(p, w, u, lo, hi, o, m)                                                                             \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_NUMBER, .want = (w), .unit = (u), .lowest = (lo), .highest = (hi),        \
        .otherwise = (o), .meaning = (m)                                                                             \
    }
#define MOMENT_OR_NUMBER(p, lo, hi, m)                                                                               \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_MOMENT_OR_NUMBER, .want = WANTED, .unit = "", .lowest = (lo),             \
        .highest = (hi), .meaning = (m)                                                                              \
    }
#define TRUTH(p, w, d, m)                                                                                            \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_TRUTH, .want = (w), .unit = "", .fallback = (d), .meaning = (m)           \
    }
#define OTHER(p, t, w, d, o, m)                                                                                      \
    {                                                                                                                \
        .path = (p), .type = SETTINGS_TYPE_##t, .want = (w), .unit = "", .fallback = (d), .otherwise = (o),          \
        .meaning = (m)                                                                                               \
    }

enum { ID_MAX = 63, NAME_MAX_BYTES = 60, SENTENCE_MAX = 200, PATH_MAX_BYTES = 1000, LIST_MAX = 100 };

static const struct settings_key keys[] = {
    OBJECT("", WANTED, "The whole configuration."),

    OBJECT("district", FOR_RUN, "Who is responsible, and on which clock and datum."),
    TEXT("district.name", WANTED, NAME_MAX_BYTES, NULL, "Name of the district, as messages begin with it."),
    OTHER("district.zone", ZONE, FOR_RUN, NULL, "UTC",
          "Zone of every clock time that people see: a fixed offset from UTC, or one IANA name that this machine "
          "knows. Stored times are UTC."),
    TEXT("district.datum", FOR_RUN, NAME_MAX_BYTES, NULL, "Height datum of zero_m and invert_m. One for all."),
    ARRAY("district.night", OPTIONAL, 2, 2, "[\"20:00\", \"06:00\"]",
          "From when to when, local time, the night crew time counts. May run over midnight."),
    OTHER("district.night[]", TIME_OF_DAY, WANTED, NULL, NULL, "A local time of day."),

    OBJECT("store", FOR_RUN, "Where the record is kept."),
    OTHER("store.file", PATH, WANTED, NULL, NULL, "The SQLite file. Only the daemon writes it."),
    OTHER("store.inbox", PATH, OPTIONAL, NULL, "the folder `inbox` beside the store",
          "Folder into which people's words are handed as files."),

    OBJECT("forecast", OPTIONAL, "How often and how far to look ahead."),
    INTEGER("forecast.every_min", OPTIONAL, "min", 1, 60, "5",
            "A cycle runs at whole multiples of this in UTC, and at once when news arrives."),
    NUMBER("forecast.horizon_h", OPTIONAL, "h", 1, 72, "12", "How far ahead passages are looked for."),
    INTEGER("forecast.members", OPTIONAL, "", 1, 1000, "400",
            "Members of the ensemble. Not used by this version, which runs a small stated set of futures."),
    NUMBER("forecast.warm_up_h", OPTIONAL, "h", 1, 240, "24",
           "How far before now the routing starts, so that it has forgotten its start. Longer than the longest "
           "travel time."),
    {.path = "forecast.time_step_s",
     .type = SETTINGS_TYPE_INTEGER,
     .unit = "s",
     .lowest = 1,
     .highest = 3600,
     .otherwise =
         "chosen: a minute, or a fortieth of the quickest flood's rise if that is less, in whole parts of the "
         "cycle",
     .meaning = "Time step of the routing. The cycle must be a whole multiple of it."},
    ARRAY("forecast.roughness_factors", OPTIONAL, 1, 8, "[0.8, 1, 1.2]",
          "Every future is routed with the roughness of all sections times each of these, rising."),
    NUMBER("forecast.roughness_factors[]", WANTED, "", 0.3, 3, NULL, "A factor on Manning's n."),
    NUMBER("forecast.carry_rise_min", OPTIONAL, "min", 0, 1440, "90",
           "One assumed future carries the last rise on for this long, then holds."),
    NUMBER("forecast.recession_h", OPTIONAL, "h", 0.1, 1000, "24",
           "Another lets the discharge fall with this time constant."),

    ARRAY("gauges", WANTED, 1, 50, NULL,
          "The river gauges whose readings drive the forecast. A gauge stands at the head of a reach: of the first, "
          "or in "
          "mid-river, where its flow takes the place of what was routed there for as long as it is measured."),
    OBJECT("gauges[]", WANTED, "One gauge."),
    NAMES("gauges[].id", GAUGE,
          "Its short name; also the name of its node in the river. No point may have the same."),
    TEXT_OTHERWISE("gauges[].name", NAME_MAX_BYTES, "its id", "Name for people."),
    WORD("gauges[].measures", OPTIONAL, "stage|discharge", "\"stage\"",
         "What it measures. Keys that end in _m are for stage, in _m3s for discharge."),
    OTHERWISE("gauges[].zero_m", OPTIONAL, "m", -500, 9000, "not stated", "Gauge zero above datum; for people only."),
    OBJECT("gauges[].rating", OPTIONAL,
           "Stage to discharge. Needed by the daemon where a gauge measures stage. Segments or a table."),
    ARRAY("gauges[].rating.segments", OPTIONAL, 1, 8, NULL,
          "Power laws Q = c (h - h0)^b (ISO 18320), from low stages to high."),
    OBJECT("gauges[].rating.segments[]", WANTED, "One power law."),
    OTHERWISE("gauges[].rating.segments[].to_m", OPTIONAL, "m", -50, 200, "no upper end; the last segment has none",
              "Upper end of the segment, a stage."),
    OTHERWISE("gauges[].rating.segments[].c", OPTIONAL, "", 1e-9, 1e9,
              "chosen so that the curve is continuous at the joint",
              "Coefficient. Stated for the first segment only."),
    NUMBER("gauges[].rating.segments[].h0_m", WANTED, "m", -50, 200, NULL,
           "Stage of zero flow in the formula of this segment."),
    NUMBER("gauges[].rating.segments[].b", WANTED, "", 0.2, 6, NULL, "Exponent."),
    ARRAY("gauges[].rating.table", OPTIONAL, 2, 256, NULL,
          "Rows of stage (m) and discharge (m3/s), both rising, straight lines between."),
    ARRAY("gauges[].rating.table[]", WANTED, 2, 2, NULL, "Stage (m), discharge (m3/s)."),
    NUMBER("gauges[].rating.table[][]", WANTED, "", -50, 1e6, NULL, "Stage or discharge."),
    OTHERWISE("gauges[].rating.highest_gauged_m", OPTIONAL, "m", -50, 200,
              "not stated: nothing is marked as beyond it",
              "Highest stage at which discharge was ever measured. What lies above is marked."),
    NUMBER("gauges[].rating.spread", OPTIONAL, "", 0, 2, "0",
           "Standard deviation of ln Q about the curve, a share. Kept for the ensemble; not used by this version."),
    ARRAY("gauges[].feeds", OPTIONAL, 0, 8, NULL,
          "Where readings come from, in order of trust. The daemon needs one, at one gauge at least."),
    OBJECT("gauges[].feeds[]", WANTED, "One source of readings."),
    WORD("gauges[].feeds[].kind", WANTED, "folder|http", NULL, "CSV files in a folder, or JSON from a web address."),
    OTHER("gauges[].feeds[].path", PATH, OPTIONAL, NULL, NULL,
          "folder: where files are dropped. Done and bad ones are moved to done/ and bad/ in it. Needed."),
    OTHER("gauges[].feeds[].append", FILE_NAME, OPTIONAL, NULL, "files are dropped whole",
          "folder: a file in it that a logger appends to."),
    TEXT("gauges[].feeds[].time", WANTED, NAME_MAX_BYTES, NULL,
         "folder: the column of observed times, by its name in the header line. http: JSON Pointer to it within one "
         "reading."),
    TEXT("gauges[].feeds[].value", WANTED, NAME_MAX_BYTES, NULL,
         "folder: the column of values. http: JSON Pointer to the value within one reading."),
    {.path = "gauges[].feeds[].unit",
     .type = SETTINGS_TYPE_WORD,
     .unit = "",
     .words = "m|cm|mm|m3/s|l/s",
     .otherwise = "m or m3/s, as the gauge measures",
     .meaning = "Unit in which the value is written."},
    OTHER("gauges[].feeds[].offset", ZONE, OPTIONAL, NULL, "such times are refused",
          "Zone of times that are written without an offset: a fixed offset, or the district's own zone."),
    OTHER("gauges[].feeds[].url", URL, OPTIONAL, NULL, NULL,
          "http: what to ask for. http or https, without user name and password. Needed."),
    OTHER("gauges[].feeds[].readings", POINTER, OPTIONAL, "\"\"", NULL,
          "http: JSON Pointer to the array, or object, of readings in the reply."),
    NUMBER("gauges[].feeds[].every_min", OPTIONAL, "min", 0.1, 1440, "5", "http: how often to ask."),
    NUMBER("gauges[].expect_every_min", OPTIONAL, "min", 0.1, 1440, "15", "How often a reading is expected."),
    NUMBER("gauges[].delivery_min", OPTIONAL, "min", 0, 1440, "5",
           "How long a reading usually takes to get here. Part of the best achievable lead."),
    NUMBER("gauges[].blind_after_min", OPTIONAL, "min", 1, 10080, "45",
           "BLIND when the newest accepted observation is older than this."),
    NUMBER("gauges[].blind_after_rising_min", OPTIONAL, "min", 1, 10080, "25",
           "The same while the river was last seen rising."),
    NUMBER("gauges[].rising_m_h", OPTIONAL, "m/h", 0, 100, "0.10", "A rise faster than this counts as rising."),
    OTHERWISE("gauges[].rising_m3s_h", OPTIONAL, "m3/s per h", 0, 1e6,
              "none; the daemon needs it where a gauge measures discharge",
              "The same for a gauge that measures discharge."),
    OBJECT(
        "gauges[].flood", OPTIONAL,
        "The severest flood that the choice of method must be right for. Without it one is assumed and `check` says "
        "so: up to the flow a quarter further above the stage of no flow than the highest gauging (else to the "
        "highest value believed), from a twentieth of it, at the fastest rise."),
    NUMBER("gauges[].flood.base_m3s", WANTED, "m3/s", 0, 1e5, NULL, "Flow before it rises."),
    NUMBER("gauges[].flood.peak_m3s", WANTED, "m3/s", 0.001, 1e5, NULL, "Its peak, above the base."),
    NUMBER("gauges[].flood.rise_h", WANTED, "h", 0.05, 1000, NULL,
           "Its rise from base to peak over its steepest rise of flow: (peak - base) / max(dQ/dt)."),
    OBJECT("gauges[].quality", FOR_RUN, "What is believed of a reading. No raw value is ever overwritten."),
    OTHERWISE("gauges[].quality.lowest_m", OPTIONAL, "m", -50, 200, "no limit",
              "A stage below this is out of range."),
    OTHERWISE("gauges[].quality.highest_m", OPTIONAL, "m", -50, 200, "no limit",
              "A stage above this is out of range."),
    OTHERWISE("gauges[].quality.fastest_rise_m_h", OPTIONAL, "m/h", 0.01, 200,
              "none; the daemon needs it where a gauge measures stage",
              "The fastest rise ever recorded or thought possible. A faster one is held for a second reading; it is "
              "also the upper edge of the envelope behind 'measured until'."),
    OTHERWISE("gauges[].quality.fastest_fall_m_h", OPTIONAL, "m/h", 0.01, 200,
              "the same as the fastest rise: rivers fall more slowly than they rise", "The fastest fall."),
    NUMBER("gauges[].quality.moving_m_h", OPTIONAL, "m/h", 0, 100, "0.10",
           "A rate above which the river counts as moving before a freeze."),
    NUMBER("gauges[].quality.resolution_m", OPTIONAL, "m", 0, 1, "0.01",
           "Changes no larger than this are no change."),
    OTHERWISE("gauges[].quality.lowest_m3s", OPTIONAL, "m3/s", 0, 1e6, "no limit",
              "A discharge below this is out of range."),
    OTHERWISE("gauges[].quality.highest_m3s", OPTIONAL, "m3/s", 0, 1e6, "no limit",
              "A discharge above this is out of range."),
    OTHERWISE("gauges[].quality.fastest_rise_m3s_h", OPTIONAL, "m3/s per h", 1e-6, 1e7,
              "none; the daemon needs it where a gauge measures discharge", "The fastest rise of discharge."),
    OTHERWISE("gauges[].quality.fastest_fall_m3s_h", OPTIONAL, "m3/s per h", 1e-6, 1e7,
              "the same as the fastest rise", "The fastest fall of discharge."),
    OTHERWISE("gauges[].quality.moving_m3s_h", OPTIONAL, "m3/s per h", 0, 1e6, "the same as rising_m3s_h",
              "A rate above which the river counts as moving before a freeze."),
    NUMBER("gauges[].quality.resolution_m3s", OPTIONAL, "m3/s", 0, 1000, "0",
           "Changes no larger than this are no change."),
    NUMBER("gauges[].quality.confirm_within_min", OPTIONAL, "min", 0, 240, "15",
           "A suspect rise is held this long for a second reading, and then counts at lower confidence."),
    NUMBER("gauges[].quality.frozen_after_h", OPTIONAL, "h", 0.1, 1000, "6",
           "A value unmoved for this long is frozen, whatever went before."),
    NUMBER("gauges[].quality.frozen_moving_min", OPTIONAL, "min", 1, 1440, "20",
           "A value unmoved for this long after the river was moving is frozen."),
    NUMBER("gauges[].quality.future_tolerance_min", OPTIONAL, "min", 0, 60, "2",
           "A reading stamped later than now by more than this waits for its time."),

    ARRAY("sections", WANTED, 1, LIST_MAX, NULL, "Cross-sections, by shape or surveyed. Reaches refer to them."),
    OBJECT("sections[]", WANTED, "One cross-section."),
    NAMES("sections[].id", SECTION, "Its short name."),
    WORD("sections[].shape", WANTED, "wide|rectangle|trapezoid|points", NULL,
         "wide: the wetted perimeter is the width. points: surveyed, roughness by panel."),
    OTHERWISE("sections[].bottom_m", OPTIONAL, "m", 0, 20000, "none; needed by all shapes but points",
              "Width of the bed."),
    OTHERWISE("sections[].side", OPTIONAL, "", 0, 100, "none; needed by trapezoid",
              "Slope of the banks, horizontal to 1 vertical."),
    OTHERWISE("sections[].n", OPTIONAL, "", 0.005, 1,
              "none; needed by all shapes, by points where panels say nothing", "Manning's n of the channel."),
    ARRAY("sections[].points", OPTIONAL, 3, 2000, NULL,
          "points: surveyed offset (m) and elevation (m), from left to right."),
    ARRAY("sections[].points[]", WANTED, 2, 2, NULL, "Offset (m), elevation (m)."),
    NUMBER("sections[].points[][]", WANTED, "m", -100000, 100000, NULL, "Offset or elevation."),
    ARRAY("sections[].panels", OPTIONAL, 1, 50, NULL,
          "points: roughness from left to right; the last panel reaches the right end."),
    OBJECT("sections[].panels[]", WANTED, "One panel."),
    NUMBER("sections[].panels[].to_m", WANTED, "m", -100000, 100000, NULL, "Offset of its right end."),
    NUMBER("sections[].panels[].n", WANTED, "", 0.005, 1, NULL, "Manning's n in it."),
    ARRAY("sections[].panels[].seasons", OPTIONAL, 2, 24, NULL, "Seasons of this panel, instead of the section's."),
    OBJECT("sections[].panels[].seasons[]", WANTED, "One season."),
    OTHER("sections[].panels[].seasons[].from", DAY_OF_YEAR, WANTED, NULL, NULL,
          "Its first day, in the district's zone."),
    NUMBER("sections[].panels[].seasons[].n_factor", WANTED, "", 0.3, 3, NULL, "On Manning's n from then on."),
    OBJECT("sections[].plain", OPTIONAL, "Flood plain beside a wide, rectangle or trapezoid shape."),
    NUMBER("sections[].plain.above_m", WANTED, "m", 0.01, 200, NULL, "Depth at which the water leaves the channel."),
    NUMBER("sections[].plain.width_m", WANTED, "m", 0.01, 100000, NULL, "Added width, both banks together."),
    NUMBER("sections[].plain.n", WANTED, "", 0.005, 1, NULL, "Manning's n on the plain."),
    ARRAY("sections[].plain.seasons", OPTIONAL, 2, 24, NULL, "Seasons of the plain, instead of the section's."),
    OBJECT("sections[].plain.seasons[]", WANTED, "One season."),
    OTHER("sections[].plain.seasons[].from", DAY_OF_YEAR, WANTED, NULL, NULL,
          "Its first day, in the district's zone."),
    NUMBER("sections[].plain.seasons[].n_factor", WANTED, "", 0.3, 3, NULL, "On Manning's n from then on."),

    ARRAY("sections[].seasons", OPTIONAL, 2, 24, NULL,
          "Roughness by season: factors on n from dates on that rise within the year; the last holds over the turn "
          "of the year. They "
          "hold for all of the section, where its plain or a panel has none of its own."),
    OBJECT("sections[].seasons[]", WANTED, "One season."),
    OTHER("sections[].seasons[].from", DAY_OF_YEAR, WANTED, NULL, NULL, "Its first day, in the district's zone."),
    NUMBER("sections[].seasons[].n_factor", WANTED, "", 0.3, 3, NULL, "On Manning's n from then on."),

    ARRAY("reaches", WANTED, 1, 500, NULL, "The river, a tree that runs downstream from gauges."),
    OBJECT("reaches[]", WANTED, "One reach, between two nodes."),
    NAMES("reaches[].id", REACH, "Its short name."),
    NODE("reaches[].from", "Node where it begins: a gauge, or where another reach ends."),
    NODE("reaches[].to", "Node where it ends. A point of that id stands there."),
    NUMBER("reaches[].length_m", WANTED, "m", 1, 1e6, NULL, "Length along the channel."),
    NUMBER("reaches[].slope", WANTED, "", 1e-6, 0.3, NULL, "Bed slope, m per m."),
    REFERS("reaches[].section", WANTED, SECTION, "Its cross-section."),
    WORD(
        "reaches[].method", OPTIONAL, "auto|muskingum-cunge|kinematic|kinematic-linear|diffusive|dynamic", "\"auto\"",
        "How it is routed. auto chooses by the gauges' floods: muskingum-cunge where that is enough, dynamic where "
        "the "
        "reach is too flat for it or a level is held; `check` says which, and why. dynamic solves the full equations "
        "and knows backwater, diffusive the same without inertia: for flat reaches, not for steep or dry ones."),
    OTHERWISE("reaches[].cell_m", OPTIONAL, "m", 0.1, 1e6, "chosen from celerity and time step",
              "Length of its cells."),
    ARRAY("reaches[].side_inflow", OPTIONAL, 0, 20, NULL, "Water that no gauge measures, by assumption."),
    OBJECT("reaches[].side_inflow[]", WANTED,
           "One side inflow: a share of a gauge's flow some time later, or a constant, or both."),
    NUMBER("reaches[].side_inflow[].at_m", OPTIONAL, "m", 0, 1e6, "0",
           "Where it enters, from the head of the reach."),
    REFERS("reaches[].side_inflow[].share_of", OPTIONAL, GAUGE, "Gauge whose flow it follows."),
    NUMBER("reaches[].side_inflow[].share", OPTIONAL, "", 0, 20, "0", "Share of that flow."),
    NUMBER("reaches[].side_inflow[].delay_min", OPTIONAL, "min", 0, 10080, "0", "How much later than at the gauge."),
    NUMBER("reaches[].side_inflow[].constant_m3s", OPTIONAL, "m3/s", 0, 1e5, "0", "A constant flow."),
    NUMBER("reaches[].side_inflow[].spread", OPTIONAL, "", 0, 5, "0",
           "How uncertain it is, a share. Kept for the ensemble; not used by this version."),
    OBJECT(
        "reaches[].outlet", OPTIONAL,
        "A level at the foot of a last reach: a lake, a tide, a weir pool. One of stage_m, stage_of and "
        "stage_series. "
        "Needs method auto, dynamic or diffusive. Without one the river goes on at normal depth. A level under the "
        "flow's critical depth does not act; the critical depth stands there then."),
    NUMBER("reaches[].outlet.stage_m", OPTIONAL, "m", 0.01, 200, NULL, "Level at the foot above the invert, held."),
    REFERS("reaches[].outlet.stage_of", OPTIONAL, GAUGE,
           "Gauge that measures the level there. It needs no rating, and need not stand at a node."),
    OTHERWISE("reaches[].outlet.bed_at_m", OPTIONAL, "m", -500, 9000, "0",
              "What that gauge reads when the water stands at the invert."),
    ARRAY(
        "reaches[].outlet.stage_series", OPTIONAL, 1, 20000, NULL,
        "Rows of time and level (m) at the foot above the invert, times rising, straight lines between, held before "
        "the first and after the last."),
    ARRAY("reaches[].outlet.stage_series[]", WANTED, 2, 2, NULL,
          "Time (RFC 3339, or for `route` seconds), level (m)."),
    MOMENT_OR_NUMBER("reaches[].outlet.stage_series[][]", -1e12, 1e12, "A time, or a level."),
    OBJECT("reaches[].foot", OPTIONAL,
           "What rates the flow at the foot by its levels: a weir, a road embankment, a culvert, a drop of the bed, "
           "with or "
           "without a reach below. Needs method auto, dynamic or diffusive, and no outlet there. It is drowned by a "
           "reach below that is computed by the same method."),
    NUMBER("reaches[].foot.drop_m", OPTIONAL, "m", 0, 200, "0",
           "How far the bed falls there. Without openings the flow is critical at the edge until the water below "
           "drowns it."),
    ARRAY("reaches[].foot.openings", OPTIONAL, 1, 8, NULL, "What the water passes through and over; the flows add."),
    OBJECT("reaches[].foot.openings[]", WANTED,
           "A weir or road, Q = Cd L H^1.5 over its crest, or the rows of a culvert. Drowned by Villemonte's rule "
           "(1947)."),
    NUMBER("reaches[].foot.openings[].crest_m", OPTIONAL, "m", 0, 100, NULL, "Weir: its crest above the bed."),
    NUMBER("reaches[].foot.openings[].length_m", OPTIONAL, "m", 0.1, 10000, NULL,
           "Weir: its length across the flow."),
    NUMBER("reaches[].foot.openings[].coefficient", OPTIONAL, "", 0.5, 2.5, "1.7",
           "Weir: Cd in SI units; 1.38 to 1.71 for a road by FHWA HDS-5, where 1.7 is the ideal crest."),
    ARRAY("reaches[].foot.openings[].rows", OPTIONAL, 2, 1000, NULL,
          "Culvert: rows of discharge (m3/s) and depth above the bed (m), both rising, the first with discharge 0 at "
          "the "
          "sill."),
    ARRAY("reaches[].foot.openings[].rows[]", WANTED, 2, 2, NULL, "Discharge (m3/s), depth (m)."),
    NUMBER("reaches[].foot.openings[].rows[][]", WANTED, "", 0, 1e6, NULL, "Discharge or depth."),
    NUMBER("reaches[].foot.openings[].open_share", OPTIONAL, "", 0, 1, "1",
           "Share that is not blocked by debris: 1 clean, less part-blocked."),

    ARRAY("points", FOR_RUN, 0, 200, NULL, "The crossings, and other places to look at."),
    OBJECT("points[]", WANTED, "One crossing."),
    NAMES("points[].id", POINT, "Its short name. If a reach ends at a node of this id, the point stands there."),
    TEXT_OTHERWISE("points[].name", NAME_MAX_BYTES, "its id", "Name for people."),
    REFERS("points[].reach", OPTIONAL, REACH, "The reach it lies on, where its id is not that of a node."),
    OTHERWISE("points[].at_m", OPTIONAL, "m", 0, 1e6, "none; goes with reach", "Where on that reach, from its head."),
    OTHERWISE("points[].invert_m", FOR_RUN, "m", -500, 9000, "not stated",
              "Lowest point of the section there, above datum. Marks are depths above it."),
    ARRAY("points[].marks", FOR_RUN, 1, 20, NULL, "Levels that matter, from low to high."),
    OBJECT("points[].marks[]", WANTED, "One mark."),
    TEXT("points[].marks[].name", WANTED, NAME_MAX_BYTES, NULL, "Its name, as messages use it."),
    NUMBER("points[].marks[].depth_m", WANTED, "m", 0, 100, NULL, "Depth above the point's invert."),
    TRUTH("points[].marks[].trafficked", OPTIONAL, "true", "Is it on the way that vehicles use? A soffit is not."),
    {.path = "points[].marks[].deck",
     .type = SETTINGS_TYPE_TRUTH,
     .unit = "",
     .fallback = "false",
     .meaning = "Is it the deck? Otherwise the first mark with deck in its name is, or the closing mark."},
    OBJECT("points[].deck", OPTIONAL,
           "How the water moves over the deck, whose level is that of the deck mark. With it depth, speed and depth "
           "times speed there are told, and which published limits they pass. Estimates, no depth to drive in."),
    WORD("points[].deck.kind", WANTED, "section|weir", NULL,
         "section: the deck is part of the cross-section, as a ford is. weir: the water falls over the road, as over "
         "an embankment."),
    NUMBER("points[].deck.n", OPTIONAL, "", 0.005, 1, "0.013",
           "section: Manning's n of the deck itself; the default is smooth concrete."),
    {.path = "points[].deck.on",
     .type = SETTINGS_TYPE_WORD,
     .unit = "",
     .words = "channel|plain",
     .otherwise = "where the water is fastest",
     .meaning = "section: on which part of a section with a plain the deck lies."},
    OTHERWISE("points[].deck.offset_m", OPTIONAL, "m", -100000, 100000, "the panel where the water is fastest",
              "section: where in a surveyed section the deck lies."),
    OTHERWISE("points[].deck.coefficient", OPTIONAL, "", 0.5, 2.5, "that of the stage rating's weir, else 1.7",
              "weir: Cd of Q = Cd L H^1.5 in SI units; 1.38 to 1.71 by FHWA HDS-5, where 1.7 is the ideal crest."),
    TEXT_OTHERWISE("points[].closing_mark", NAME_MAX_BYTES, "the lowest trafficked mark",
                   "Name of the mark before which the road must be shut. Another one than the lowest trafficked must "
                   "be signed."),
    TEXT("points[].closing_mark_signed", OPTIONAL, ID_MAX, NULL, "Role of who signed another closing mark."),
    OBJECT("points[].crew", OPTIONAL,
           "How long closing takes, from the call until both sides are shut: the slow value. Without it the point is "
           "watched, nobody is sent."),
    NUMBER("points[].crew.day_min", WANTED, "min", 1, 1440, NULL, "By day."),
    NUMBER("points[].crew.night_min", WANTED, "min", 1, 1440, NULL, "By night."),
    NUMBER("points[].crew.margin_min", WANTED, "min", 0, 1440, NULL,
           "Margin on top, signed. Need = crew + margin; act-by = earliest arrival at the closing mark - need."),
    NUMBER("points[].muster_chance", OPTIONAL, "", 0.0001, 0.10, "0.10",
           "MUSTER from this chance of the closing mark on. At most 0.10, so that it cannot come after the earliest "
           "arrival."),
    NUMBER("points[].step_down_chance", OPTIONAL, "", 0, 0.10, "0.05",
           "Below this chance MUSTER may go back to QUIET."),
    NUMBER("points[].step_down_dwell_min", OPTIONAL, "min", 0, 1440, "30", "and only after this long."),
    NUMBER("points[].act_by_shift_min", OPTIONAL, "min", 1, 240, "10",
           "An act-by that moves by more than this is a new decision, and told."),
    NUMBER("points[].blind_dead_h", OPTIONAL, "h", 1, 240, "24",
           "A gauge silent for longer never lets this point rest at QUIET."),
    OBJECT("points[].reopen", OPTIONAL, "When a walk-over may be proposed. The limits are signed."),
    NUMBER("points[].reopen.below_m", OPTIONAL, "m", 0, 10, "0.10", "The level must be below the deck by this much,"),
    NUMBER("points[].reopen.hold_min", OPTIONAL, "min", 0, 1440, "60", "for this long, on measured water,"),
    NUMBER("points[].reopen.return_chance", OPTIONAL, "", 0, 0.5, "0.10",
           "with the chance of water back at the closing mark below this,"),
    NUMBER("points[].reopen.reopen_and_reclose_min", OPTIONAL, "min", 1, 1440, "120",
           "before it could be opened and shut again, which takes this long."),
    REFERS("points[].detour_over", OPTIONAL, POINT, "The crossing over which the diversion runs."),
    ARRAY("points[].access_over", OPTIONAL, 0, 20, NULL, "Crossings that the crew itself must pass to get here."),
    REFERS("points[].access_over[]", WANTED, POINT, "A crossing."),
    ARRAY("points[].triggers", OPTIONAL, 0, 20, NULL,
          "Signed gauge levels that give SEND by themselves, also on a rise carried forward while the gauge is "
          "silent."),
    OBJECT("points[].triggers[]", WANTED, "One trigger."),
    REFERS("points[].triggers[].gauge", WANTED, GAUGE, "The gauge."),
    OTHERWISE("points[].triggers[].stage_m", OPTIONAL, "m", -50, 200, "none; needed where the gauge measures stage",
              "At or above this stage"),
    OTHERWISE("points[].triggers[].discharge_m3s", OPTIONAL, "m3/s", 0, 1e6,
              "none; needed where the gauge measures discharge", "or this discharge it holds,"),
    TRUTH("points[].triggers[].rising", OPTIONAL, "false", "and only while rising, when true."),
    WORD("points[].triggers[].gives", OPTIONAL, "SEND", "\"SEND\"", "What it gives."),
    TEXT("points[].triggers[].signed", WANTED, ID_MAX, NULL, "Role of who signed it."),
    OBJECT("points[].stage_rating", OPTIONAL,
           "The level at this point for a flow, where the section's normal stage is not enough: a low bridge, a weir "
           "over the road."),
    ARRAY("points[].stage_rating.clean", OPTIONAL, 2, 1000, NULL,
          "Rows of discharge (m3/s), rising, and stage above the invert (m), never falling; straight lines between."),
    ARRAY("points[].stage_rating.clean[]", WANTED, 2, 2, NULL, "Discharge (m3/s), stage (m)."),
    NUMBER("points[].stage_rating.clean[][]", WANTED, "", 0, 1e6, NULL, "Discharge or stage."),
    ARRAY("points[].stage_rating.part_blocked", OPTIONAL, 2, 1000, NULL,
          "The same with the opening part-blocked by debris, shown beside it."),
    ARRAY("points[].stage_rating.part_blocked[]", WANTED, 2, 2, NULL, "Discharge (m3/s), stage (m)."),
    NUMBER("points[].stage_rating.part_blocked[][]", WANTED, "", 0, 1e6, NULL, "Discharge or stage."),
    OBJECT("points[].stage_rating.weir", OPTIONAL,
           "Instead of rows: the road as a weir over an opening, Q = Cd L H^1.5 (FHWA HDS-5) and the opening's own "
           "rows. "
           "The level is that above it, against the section's normal depth below (Villemonte's rule)."),
    OTHERWISE("points[].stage_rating.weir.crest_m", OPTIONAL, "m", 0, 100, "the deck mark's depth",
              "Crown of the road above the invert."),
    NUMBER("points[].stage_rating.weir.length_m", WANTED, "m", 0.1, 10000, NULL,
           "Length of road that the water falls over."),
    NUMBER("points[].stage_rating.weir.coefficient", WANTED, "", 0.5, 2.5, NULL,
           "Cd in SI units; 1.38 to 1.71 by HDS-5. A smaller one gives the higher level."),
    ARRAY(
        "points[].stage_rating.weir.opening", OPTIONAL, 2, 1000, NULL,
        "What passes under the road: rows of discharge (m3/s) and level above the invert (m), both rising, the first "
        "with 0 m3/s at its sill; beyond the last row its last line is carried on."),
    ARRAY("points[].stage_rating.weir.opening[]", WANTED, 2, 2, NULL, "Discharge (m3/s), level (m)."),
    NUMBER("points[].stage_rating.weir.opening[][]", WANTED, "", 0, 1e6, NULL, "Discharge or level."),
    OBJECT("points[].stage_rating.weir.part_blocked", OPTIONAL,
           "The same part-blocked by debris, shown beside it: the shares that stay open."),
    NUMBER("points[].stage_rating.weir.part_blocked.opening_share", OPTIONAL, "", 0, 1, "1", "Of the opening."),
    NUMBER("points[].stage_rating.weir.part_blocked.length_share", OPTIONAL, "", 0.01, 1, "1",
           "Of the road's length: debris against rails."),
    ARRAY("points[].cannot_see", OPTIONAL, 0, 20, NULL,
          "Standing sentences: what this forecast cannot see here. Printed in every bulletin."),
    TEXT("points[].cannot_see[]", WANTED, SENTENCE_MAX, NULL, "One sentence."),

    ARRAY("roster", OPTIONAL, 0, 20, NULL, "Who is told, in this order."),
    OBJECT("roster[]", WANTED, "One step."),
    TEXT("roster[].role", WANTED, ID_MAX, NULL, "A role, never a person's name."),
    ARRAY("roster[].to", WANTED, 1, 10, NULL, "Channels by which the role is told."),
    REFERS("roster[].to[]", WANTED, CHANNEL, "A channel."),
    NUMBER("roster[].accept_within_min", OPTIONAL, "min", 1, 240, "10", "How long to wait for an answer."),

    ARRAY("channels", OPTIONAL, 0, 50, NULL, "Ways to tell people."),
    OBJECT("channels[]", WANTED, "One channel."),
    NAMES("channels[].id", CHANNEL, "Its short name."),
    WORD("channels[].kind", WANTED, "command|journal|webhook|mail|cap", NULL,
         "command runs a program of yours; journal writes to the system's log. webhook, mail and cap are not in this "
         "version and are refused."),
    ARRAY("channels[].run", OPTIONAL, 1, 50, NULL,
          "command: the program and its arguments. Secrets do not belong here; the program reads them from a file of "
          "its own."),
    TEXT("channels[].run[]", WANTED, PATH_MAX_BYTES, NULL,
         "The program (relative paths start at the folder of the configuration), then its arguments."),

    OBJECT("page", OPTIONAL, "The duty page. Not in this version."),
    OTHER("page.listen", HOST_PORT, OPTIONAL, "\"127.0.0.1:8460\"", NULL,
          "Where the page will listen. Checked, and not used by this version."),
};

size_t settings_keys_count(void)
{
    return sizeof keys / sizeof keys[0];
}

const struct settings_key *settings_keys_at(size_t index)
{
    return &keys[index];
}

const struct settings_key *settings_keys_find(const char *path)
{
    for (size_t i = 0; i < settings_keys_count(); i++)
        if (strcmp(keys[i].path, path) == 0)
            return &keys[i];
    return NULL;
}

const char *settings_keys_name_in(const struct settings_key *key, const struct settings_key *parent)
{
    size_t length = strlen(parent->path);
    if (key == parent || strncmp(key->path, parent->path, length) != 0)
        return NULL;
    const char *name = key->path + length;
    if (length > 0 && *name++ != '.')
        return NULL;
    return strpbrk(name, ".[") == NULL ? name : NULL;
}

const struct settings_key *settings_keys_below(const struct settings_key *key, const char *name)
{
    size_t length = strlen(key->path);
    for (size_t i = 0; i < settings_keys_count(); i++) {
        if (name != NULL) {
            const char *known = settings_keys_name_in(&keys[i], key);
            if (known != NULL && strcmp(known, name) == 0)
                return &keys[i];
        } else if (strncmp(keys[i].path, key->path, length) == 0 && strcmp(keys[i].path + length, "[]") == 0) {
            return &keys[i];
        }
    }
    return NULL;
}
