/* A bare JACK client, the control of the end-to-end tests: it connects itself
 * to the first two ports of whatever plays, records them and the times of every
 * cycle, and counts the dropouts that the server tells of.
 *
 *     jackprobe NAME SECONDS PREFIX [deaf]
 *
 * With "deaf" it connects to nothing, so that nobody's work delays it. It prints "ready" once it runs and "connected" once it hears something, and
 * ends when its standard input does. Then it writes PREFIX.audio, interleaved
 * 32-bit floats of two channels; PREFIX.cycles, a line a cycle: its first frame,
 * its start and its successor's as the server's clock has them, when the
 * client was woken, and when it was done (all in us of the monotonic clock); and
 * PREFIX.xruns, a line a dropout with its time in us. */
#include <jack/jack.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

struct cycle {
	jack_nframes_t frame, frames;
	jack_time_t start, next, woken, done;
};

static jack_client_t *client;
static jack_port_t *in[2];
static float *audio;
static size_t audio_most, audio_count; /* frames */
static struct cycle *cycles;
static size_t cycles_most, cycles_count;
#define XRUNS_MOST 100000
static jack_time_t xruns[XRUNS_MOST];
static size_t xruns_count;

/* The time in us of CLOCK_MONOTONIC, the clock of the program under test. The
 * server's own may be CLOCK_MONOTONIC_RAW, which drifts against it. */
static jack_time_t now(void)
{
	struct timespec t;
	clock_gettime(CLOCK_MONOTONIC, &t);
	return (jack_time_t)t.tv_sec * 1000000 + t.tv_nsec / 1000;
}

static int process(jack_nframes_t frames, void *unused)
{
	struct cycle c = {.frames = frames, .woken = now()};
	jack_time_t apart = c.woken - jack_get_time();
	float period;
	(void)unused;
	jack_get_cycle_times(client, &c.frame, &c.start, &c.next, &period);
	c.start += apart;
	c.next += apart;
	if (audio_count + frames > audio_most || cycles_count == cycles_most)
		return 0;
	float *left = jack_port_get_buffer(in[0], frames);
	float *right = jack_port_get_buffer(in[1], frames);
	for (jack_nframes_t i = 0; i < frames; i++) {
		audio[2 * (audio_count + i)] = left[i];
		audio[2 * (audio_count + i) + 1] = right[i];
	}
	audio_count += frames;
	c.done = now();
	cycles[cycles_count++] = c;
	return 0;
}

static int xrun(void *unused)
{
	(void)unused;
	if (xruns_count < XRUNS_MOST)
		xruns[xruns_count++] = now();
	return 0;
}

/* Connects to the first two output ports that are neither ours nor hardware. */
static int listen_in(void)
{
	const char **ports = jack_get_ports(client, NULL, JACK_DEFAULT_AUDIO_TYPE, JackPortIsOutput);
	int found = 0;
	for (int i = 0; ports && ports[i] && found < 2; i++) {
		jack_port_t *p = jack_port_by_name(client, ports[i]);
		if (!p || jack_port_is_mine(client, p) || (jack_port_flags(p) & JackPortIsPhysical))
			continue;
		if (!jack_port_connected_to(in[found], ports[i]) && jack_connect(client, ports[i], jack_port_name(in[found])))
			break;
		found++;
	}
	jack_free(ports);
	return found;
}

static FILE *create(const char *prefix, const char *suffix)
{
	char path[4096];
	snprintf(path, sizeof path, "%s.%s", prefix, suffix);
	FILE *f = fopen(path, "wb");
	if (!f) {
		perror(path);
		exit(1);
	}
	return f;
}

static void write_out(const char *prefix)
{
	FILE *f = create(prefix, "audio");
	fwrite(audio, 2 * sizeof *audio, audio_count, f);
	if (fclose(f))
		exit(1);
	f = create(prefix, "cycles");
	for (size_t i = 0; i < cycles_count; i++) {
		struct cycle *c = &cycles[i];
		fprintf(f, "%u %u %llu %llu %llu %llu\n", c->frame, c->frames, (unsigned long long)c->start,
			(unsigned long long)c->next, (unsigned long long)c->woken, (unsigned long long)c->done);
	}
	if (fclose(f))
		exit(1);
	f = create(prefix, "xruns");
	for (size_t i = 0; i < xruns_count; i++)
		fprintf(f, "%llu\n", (unsigned long long)xruns[i]);
	if (fclose(f))
		exit(1);
}

int main(int argc, char **argv)
{
	if (argc != 4 && argc != 5) {
		fprintf(stderr, "usage: jackprobe NAME SECONDS PREFIX [deaf]\n");
		return 2;
	}
	client = jack_client_open(argv[1], JackNoStartServer, NULL);
	if (!client) {
		fprintf(stderr, "jackprobe: no server\n");
		return 1;
	}
	audio_most = (size_t)atoi(argv[2]) * jack_get_sample_rate(client);
	cycles_most = audio_most / jack_get_buffer_size(client) + 1;
	audio = malloc(2 * audio_most * sizeof *audio);
	cycles = malloc(cycles_most * sizeof *cycles);
	if (!audio || !cycles)
		return 1;
	/* Touched now, so that no page is first met in the callback. */
	memset(audio, 0, 2 * audio_most * sizeof *audio);
	memset(cycles, 0, cycles_most * sizeof *cycles);
	in[0] = jack_port_register(client, "left", JACK_DEFAULT_AUDIO_TYPE, JackPortIsInput, 0);
	in[1] = jack_port_register(client, "right", JACK_DEFAULT_AUDIO_TYPE, JackPortIsInput, 0);
	jack_set_process_callback(client, process, NULL);
	jack_set_xrun_callback(client, xrun, NULL);
	if (!in[0] || !in[1] || jack_activate(client))
		return 1;
	printf("ready\n");
	fflush(stdout);

	struct pollfd gone = {.fd = 0, .events = POLLIN};
	int deaf = argc == 5, heard = 0;
	while (poll(&gone, 1, 20) == 0) {
		int hears = deaf || listen_in() == 2;
		if (hears != heard && !deaf) {
			printf(hears ? "connected\n" : "alone\n");
			fflush(stdout);
		}
		heard = hears;
	}
	jack_deactivate(client);
	write_out(argv[3]);
	jack_client_close(client);
	return 0;
}
