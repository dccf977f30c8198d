/* Start-up for the emulated boards: vectors, floating-point unit, zeroed
   memory, and an exit status through semihosting. */
#include <stdint.h>

extern uint32_t stack_top[];
extern uint32_t bss_start[];
extern uint32_t bss_end[];
int main(void);
void reset(void);

static void leave(uint32_t status)
{
    /* SYS_EXIT_EXTENDED with "application exit". */
    const uint32_t block[2] = { 0x20026u, status };
    register uint32_t operation __asm__("r0") = 0x20u;
    register const uint32_t *argument __asm__("r1") = block;

    __asm__ volatile("bkpt 0xAB" : "+r"(operation) : "r"(argument) : "memory");
    for (;;) {
    }
}

static void fault(void)
{
    leave(99u);
}

__attribute__((section(".vectors"), used)) static const void *const vectors[16] = {
    stack_top, (const void *)reset, (const void *)fault, (const void *)fault, (const void *)fault,
    (const void *)fault, (const void *)fault
};

void reset(void)
{
    uint32_t *word;

#if defined(__ARM_FP)
    *(volatile uint32_t *)0xE000ED88u |= 0xFu << 20;
    __asm__ volatile("dsb\n isb" ::: "memory");
#endif
    for (word = bss_start; word < bss_end; word++) {
        *word = 0u;
    }
    leave((uint32_t)main());
}
