/* Commands from shore: filled by the interrupt of the shore link, drained by the main loop. */
#ifndef COMMANDS_H
#define COMMANDS_H

#include <stdbool.h>
#include <stdint.h>

#define COMMAND_FEED 0x01u
#define COMMAND_RINSE 0x02u
#define COMMAND_MUTE 0x03u
#define COMMAND_HOLD 0x04u
#define COMMAND_REPORT 0x05u
#define COMMAND_STOP 0x06u

struct command {
    uint8_t code;
    uint8_t channel;
    uint16_t value;
};

bool command_put(uint8_t code, uint8_t channel, uint16_t value);
bool command_take(struct command *out);

#endif
