#define _GNU_SOURCE
#include "jackdown.h"
#include <dlfcn.h>
#include <stdatomic.h>
#include <stddef.h>

typedef void (*shutdown_function)(void *);
typedef void (*register_function)(void *client, shutdown_function, void *);

static _Atomic(shutdown_function) portaudios;
static _Atomic(void *) portaudios_argument;
static atomic_int down;

static void server_down(void *unused) {
	(void)unused;
	atomic_store(&down, 1);
	jackdown_ring();
}

/* The program's own symbols come before those of libjack, so PortAudio calls these. */
void jack_on_shutdown(void *client, shutdown_function function, void *argument) {
	register_function next = (register_function)dlsym(RTLD_NEXT, "jack_on_shutdown");
	atomic_store(&portaudios_argument, argument);
	atomic_store(&portaudios, function);
	atomic_store(&down, 0);
	if (next)
		next(client, server_down, NULL);
}

/*
 * What a client says to a server that is gone fails, and PortAudio asserts that
 * it does not. There is nothing left that could matter, so all is well.
 */
static int say(const char *name, void *client, void *port) {
	int (*next)(void *, void *) = (int (*)(void *, void *))dlsym(RTLD_NEXT, name);
	int result = next ? next(client, port) : 0;
	return atomic_load(&down) ? 0 : result;
}

int jack_port_unregister(void *client, void *port) { return say("jack_port_unregister", client, port); }

int jack_deactivate(void *client) { return say("jack_deactivate", client, NULL); }

int jack_client_close(void *client) { return say("jack_client_close", client, NULL); }

int jackdown_is(void) { return atomic_load(&down); }

void jackdown_ring(void) {
	shutdown_function function = atomic_load(&portaudios);
	if (function)
		function(atomic_load(&portaudios_argument));
}
