/* Whether the JACK server that PortAudio was connected to has gone. */
int jackdown_is(void);
/* Tells PortAudio once more, which wakes a call of it that waits for the server. */
void jackdown_ring(void);
