/* Who holds a card, as the kernel's files under /proc tell it (Linux: sound/core/pcm.c writes
 * "owner_pid   : N" into a substream's status). The files here are made up. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "input/alsa_card.h"
#include "support/scratch.h"

#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static struct scratch scratch;

static void write_file(const char *folders, const char *name, const char *text)
{
    char path[512];
    for (const char *end = strchr(folders, '/'); end != NULL; end = strchr(end + 1, '/')) {
        (void)snprintf(path, sizeof path, "%s/%.*s", scratch.folder, (int)(end - folders), folders);
        (void)mkdir(path, 0700);
    }
    (void)snprintf(path, sizeof path, "%s/%s%s", scratch.folder, folders, name);
    scratch_write(path, text, strlen(text));
}

static void the_program_that_holds_a_card_is_named(void **state)
{
    (void)state;
    char holder[96] = "";
    write_file("proc/asound/card1/pcm0c/sub0/", "status", "closed\n");
    write_file("proc/asound/card1/pcm0c/sub1/", "status",
               "state: RUNNING\nowner_pid   : 4711\ntrigger_time: 1.0\n");
    write_file("proc/4711/", "comm", "soundserver\n");
    assert_true(alsa_card_holder(scratch.folder, 1, 0, holder, sizeof holder));
    assert_string_equal(holder, "soundserver, process 4711");
}

static void a_free_card_has_no_holder(void **state)
{
    (void)state;
    char holder[96] = "";
    write_file("proc/asound/card2/pcm0c/sub0/", "status", "closed\n");
    assert_false(alsa_card_holder(scratch.folder, 2, 0, holder, sizeof holder));
    assert_false(alsa_card_holder(scratch.folder, 3, 0, holder, sizeof holder));
    write_file("proc/asound/card2/pcm1c/sub0/", "status", "owner_pid\n");
    assert_false(alsa_card_holder(scratch.folder, 2, 1, holder, sizeof holder));
}

static void a_card_that_is_not_there_says_so(void **state)
{
    (void)state;
    char text[64];
    int card = 31, device = -1;
    assert_false(alsa_card_id(31, text, sizeof text));
    assert_false(alsa_card_gain_control(31, text, sizeof text));
    assert_false(alsa_card_next_capture(&card, &device) && card == 31);
}

static int begin(void **state)
{
    (void)state;
    scratch_make(&scratch);
    return 0;
}

static int end(void **state)
{
    (void)state;
    scratch_remove(&scratch);
    return 0;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_program_that_holds_a_card_is_named),
        cmocka_unit_test(a_free_card_has_no_holder),
        cmocka_unit_test(a_card_that_is_not_there_says_so),
    };
    return cmocka_run_group_tests_name("input.alsa_card", tests, begin, end);
}
