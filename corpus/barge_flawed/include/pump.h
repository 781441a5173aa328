/* The pump that rinses the pipe with sea water. */
#ifndef PUMP_H
#define PUMP_H

void pump_request_rinse(void);
void pump_poll(void);

#endif
