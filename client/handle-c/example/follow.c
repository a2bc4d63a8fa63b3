/*
 * An audio thread that runs what the main thread arms. The main thread stands for a gRPC client:
 * it makes up a setting and a sink whose count it reads.
 */
#include <inttypes.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>

#include "ratewright_handle.h"

static void must(int holds, const char *what) {
    if (!holds) {
        fprintf(stderr, "failed: %s\n", what);
        exit(1);
    }
}

static void done(int status) { must(status == RW_OK, rw_status_text(status)); }

/* One second of 48 kHz, as fast as it goes. */
static void *resample(void *argument) {
    rw_reader *reader = argument;
    uint64_t sink_sample = 48000, inputs = 0, phase = 0, phases = 0;
    while (sink_sample < 96000) {
        rw_block block = rw_reader_next_block(reader, sink_sample);
        if (phases != 0 && phases != block.l) phase = phase * block.l / phases;
        phases = block.l;
        for (uint64_t output = 0; output < block.outputs; output++) {
            /* ... make one output with the filter of this phase ... */
            phase += block.m;
            inputs += phase / phases;
            phase %= phases;
        }
        sink_sample += block.outputs;
        rw_reader_set_level(reader, 0.25);
    }
    printf("%" PRIu64 " inputs made %" PRIu64 " outputs\n", inputs, sink_sample - 48000);
    return NULL;
}

int main(void) {
    const rw_run nominal = {.kind = RW_SINGLE, .low_l = 160, .low_m = 147};
    rw_writer *writer;
    rw_reader *reader;
    done(rw_handle_new(&nominal, &writer, &reader));

    /* The sink had counted 48000 samples when house time was 1 s. */
    const rw_timescale timescale = {
        .sample = 48000, .house_ns = 1000000000, .rate_hz = 48000.0, .deviation_ns = 10000.0};
    done(rw_writer_set_timescale(writer, &timescale));

    /* 44.1 kHz that runs 37 ppm slow: two neighbouring ratios from 1.5 s on. */
    const rw_setting setting = {
        .epoch = 1,
        .number = 1,
        .run = {.kind = RW_CADENCE,
                .wanted_numerator = 160005920,
                .wanted_denominator = 147000000,
                .low_l = 160,
                .low_m = 147,
                .high_l = 123,
                .high_m = 113},
        .effect_ns = 1500000000,
        .expiry_ns = 3600000000000,
    };
    done(rw_writer_arm(writer, &setting));
    must(rw_writer_arm(writer, &setting) == RW_NOT_NEWER, "the same again is refused");
    rw_setting nonsense = setting;
    nonsense.number = 2;
    nonsense.run.high_m = 0;
    must(rw_writer_arm(writer, &nonsense) == RW_BAD_RUN, "a ratio over 0 is refused");
    must(rw_writer_arm(NULL, &setting) == RW_NULL, "no writer is refused");

    pthread_t audio;
    must(pthread_create(&audio, NULL, resample, reader) == 0, "a thread starts");
    must(pthread_join(audio, NULL) == 0, "and ends");

    rw_applied applied;
    must(rw_writer_next_applied(writer, &applied) == 1, "the setting took effect");
    printf("setting %" PRIu64 "-%" PRIu64 " took effect at sample %" PRIu64 ", %" PRId64 " ns\n",
           applied.epoch, applied.number, applied.sink_sample, applied.house_ns);
    must(applied.sink_sample >= 72000 && applied.sink_sample < 72160, "at the first block end");
    must(rw_writer_next_applied(writer, &applied) == 0, "once");
    rw_level level;
    must(rw_writer_level(writer, &level) == 1 && level.level_samples == 0.25, "the level is read");
    uint64_t epoch, number;
    must(rw_reader_setting(reader, &epoch, &number) == 1 && number == 1, "it is running");
    must(!rw_reader_is_expired(reader), "it is not expired");
    done(rw_writer_trim(writer, -5));

    rw_reader_free(reader);
    rw_writer_free(writer);
    return 0;
}
