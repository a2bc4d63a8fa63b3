/*
 * The ratio of an audio thread's next block: wait-free, without allocation or system call.
 *
 * rw_handle_new() makes a pair. The writer belongs to one thread, which hears of settings; the
 * reader to another, which resamples. Each may be handed to another thread, but is used by one at
 * a time.
 *
 * House time is the daemon's: ns since 1970-01-01 on a TAI-like scale, 37 s ahead of Unix time.
 * Samples are those of the sink. Levels: positive is a fuller buffer.
 *
 * This library speaks to no daemon. A neighbour with a gRPC client (any language has one:
 * client/python/follow.py hears settings) hands over
 *   - settings: rw_setting from the contract's Setting. `single` gives low_l and low_m; `cadence` and
 *     `lazy.cadence` their low and high; `stepping` its phases (the advances follow from them);
 *     `wanted` is the long-run average, and both of its parts fit 64 bits. What it hands over it has
 *     verified, as the Rust library does, or trusts.
 *   - house time: from ExchangeTime of the ReadingService, the quickest of some exchanges. With it the
 *     neighbour, or whoever reads the sink's counter, draws a straight line through readings of
 *     (count, house time) of the last half minute or so; that line is the rw_timescale.
 * and carries rw_applied and rw_level back, as Applied and Occupancy.
 *
 * Build with `cargo build --release -p ratewright-handle-c`; link with libratewright_handle_c.a of
 * target/release, and on Linux with -lpthread -ldl -lm.
 */
#ifndef RATEWRIGHT_HANDLE_H
#define RATEWRIGHT_HANDLE_H

#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef struct rw_writer rw_writer;
typedef struct rw_reader rw_reader;

/* What a call returns. */
typedef enum rw_status {
    RW_OK = 0,
    RW_NULL = 1,          /* a pointer is null */
    RW_BAD_RUN = 2,       /* run: no kind of that number, or parts that make no such thing */
    RW_BAD_SWING = 3,     /* run.swing_samples is below the error bound of the pair */
    RW_NOT_NEWER = 4,     /* (epoch, number) is not above all that were armed before */
    RW_BAD_TIMESCALE = 5, /* rate_hz not above 0, deviation_ns below 0, or counter_epoch fell */
    RW_BAD_TRIM = 6       /* nothing to trim, a single ratio, or more than the pair can make */
} rw_status;

/* The status in words: the field and what is accepted. Never null, never to be freed. */
const char *rw_status_text(int status);

/* How a resampler realises a ratio. */
typedef enum rw_kind {
    RW_SINGLE = 1,   /* low_l / low_m */
    RW_CADENCE = 2,  /* two ratios around the wanted one, in turn at block ends */
    RW_STEPPING = 3, /* one table of `phases` phases, and two advances in turn at each output */
    RW_LAZY = 4      /* two ratios, each held until the error would leave +-swing_samples */
} rw_kind;

/* What to run. Fields that its kind does not name are not read. */
typedef struct rw_run {
    uint32_t kind;               /* an rw_kind */
    uint64_t wanted_numerator;   /* long-run average; not read for RW_SINGLE */
    uint64_t wanted_denominator;
    uint64_t low_l, low_m;       /* RW_SINGLE, RW_CADENCE, RW_LAZY; in lowest terms */
    uint64_t high_l, high_m;     /* RW_CADENCE, RW_LAZY */
    uint64_t phases;             /* RW_STEPPING; the two advances follow from it and the average */
    double swing_samples;        /* RW_LAZY, output samples */
} rw_run;

/* A setting and its instant. */
typedef struct rw_setting {
    uint64_t epoch, number; /* a later epoch is newer whatever the number */
    rw_run run;
    int64_t effect_ns;      /* house time: the first block end at or after it */
    int64_t expiry_ns;      /* house time after which the reader calls itself expired */
} rw_setting;

/*
 * At house time `house_ns` the sink had counted `sample` samples, and it goes on at `rate_hz`
 * samples in a second of house time: the nominal rate does until a line through readings is better.
 */
typedef struct rw_timescale {
    uint64_t counter_epoch; /* grows when the sink began to count anew */
    uint64_t sample;        /* on the counter that rw_reader_next_block() is told */
    int64_t house_ns;
    double rate_hz;
    double deviation_ns; /* standard deviation of house_ns; comes back in rw_applied */
} rw_timescale;

/* What truly took effect. */
typedef struct rw_applied {
    uint64_t epoch, number;
    uint64_t sink_sample; /* the sink's count at the block end */
    uint64_t counter_epoch;
    int64_t house_ns;
    double deviation_ns;
} rw_applied;

/* How full the audio thread's buffer was. */
typedef struct rw_level {
    double level_samples; /* from the centre */
    uint64_t sink_sample;
} rw_level;

/*
 * What to run next: `outputs` outputs, each `m` phases of `l` after the one before. Of a ratio that
 * is a whole block, L outputs of M inputs; of a stepping it is one output.
 *
 * The resampler keeps a phase, 0 to l - 1, from output to output. After each output
 *     phase += m;  inputs taken += phase / l;  phase %= l;
 * so that a whole block ends at the phase at which it began. Where `l` is another than before,
 * phase = phase * l / l before: that loses less than one phase. A block may be longer than an audio
 * callback: make as much of it as the callback asks for, the rest in the next, and ask for another
 * block only when it is done.
 */
typedef struct rw_block {
    uint64_t l, m, outputs;
} rw_block;

/* Makes a pair that runs `initial` until the first setting takes effect. */
int rw_handle_new(const rw_run *initial, rw_writer **writer, rw_reader **reader);

/* Each is freed by itself, in either order; null is nothing to free. */
void rw_writer_free(rw_writer *writer);
void rw_reader_free(rw_reader *reader);

/* --- the writer's thread ------------------------------------------------------------------- */

/*
 * Arms a setting; up to four can wait for their instants, and of more the oldest is given up. A
 * refused one changes nothing.
 */
int rw_writer_arm(rw_writer *writer, const rw_setting *setting);

/*
 * Tells where the sink's count stands; to be refreshed a few times a second. Before the first,
 * settings wait.
 */
int rw_writer_set_timescale(rw_writer *writer, const rw_timescale *timescale);

/*
 * Changes the running average by `ppb` parts per billion until the next setting; 0 undoes it. For
 * past expiry, if at all: -level / (60 s * rate) * 1e9 brings a level back within a minute or so;
 * keep it within what may be heard, a few thousand.
 */
int rw_writer_trim(rw_writer *writer, int64_t ppb);

/* The oldest report that was not taken: 1, and *applied is written; or 0. */
int rw_writer_next_applied(rw_writer *writer, rw_applied *applied);

/* The level that was left last: 1, and *level is written; or 0 if none ever was. */
int rw_writer_level(rw_writer *writer, rw_level *level);

/* --- the audio thread ------------------------------------------------------------------------ */

/*
 * To be called at every block end, with the sink's count of samples there, on the counter of
 * rw_timescale: what the sink has taken, and what was made ahead of it in this callback. A latency
 * of the device behind that counter only moves the instant by as much. A setting whose instant has
 * come takes effect with this block. All zero if `reader` is null: no outputs, so do not loop on it.
 */
rw_block rw_reader_next_block(rw_reader *reader, uint64_t sink_sample);

/* 1 if the running setting was past its expiry at the newest block end; it goes on being run. */
int rw_reader_is_expired(const rw_reader *reader);

/* The setting that is running: 1, and both are written; or 0 before the first. */
int rw_reader_setting(const rw_reader *reader, uint64_t *epoch, uint64_t *number);

/* Says that the sink counts anew: settings wait for a timescale of this counter epoch. */
void rw_reader_restart(rw_reader *reader, uint64_t counter_epoch);

/* Leaves word of how full the buffer is, as often as is convenient: the newest counts. */
void rw_reader_set_level(rw_reader *reader, double level_samples);

#ifdef __cplusplus
}
#endif

#endif
