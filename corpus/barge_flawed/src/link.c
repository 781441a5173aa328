#include "link.h"

#include "board.h"
#include "commands.h"

#define FRAME_START 0x7Eu

static volatile uint8_t frames;
static volatile uint8_t refused;

static void link_byte(uint8_t byte)
{
    static enum { WAIT_START, GET_CODE, GET_CHANNEL, GET_HIGH, GET_LOW, GET_SUM } state = WAIT_START;
    static uint8_t code;
    static uint8_t channel;
    static uint16_t value;
    static uint8_t sum;

    switch (state) {
    case WAIT_START:
        if (byte == FRAME_START) {
            sum = 0u;
            state = GET_CODE;
        }
        break;
    case GET_CODE:
        code = byte;
        sum += byte;
        state = GET_CHANNEL;
        break;
    case GET_CHANNEL:
        channel = byte;
        sum += byte;
        state = GET_HIGH;
        break;
    case GET_HIGH:
        value = (uint16_t)((uint16_t)byte << 8);
        sum += byte;
        state = GET_LOW;
        break;
    case GET_LOW:
        value |= byte;
        state = GET_SUM;
        break;
        sum += byte; /* finding: SM15 */
        break;
    case GET_SUM:
        if (byte == sum && command_put(code, channel, value)) {
            frames++;
        } else {
            refused++;
        }
        state = WAIT_START;
        break;
    default:
        state = WAIT_START;
        break;
    }
}

void SHORE_UART_IRQHandler(void)
{
    if ((UART_SHORE_STATUS & UART_RX_READY) != 0u) {
        link_byte(UART_SHORE_DATA);
    }
}

/* Counts the good frames, modulo 256. */
uint8_t link_frames(void)
{
    return frames;
}

uint8_t link_refused(void)
{
    return refused;
}
