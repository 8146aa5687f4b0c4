#include "cli/command.h"

#include <gsl/gsl_errno.h>
#include <locale.h>

static const RfCommand *const commands[] = {
    &rf_command_run,    &rf_command_check, &rf_command_calibrate, &rf_command_paths,
    &rf_command_charge, &rf_command_audit, &rf_command_plan,      &rf_command_simulate,
    NULL,
};

int main(int argc, char **argv)
{
    setlocale(LC_CTYPE, ""); /* file names as the terminal writes them; numbers stay in the C locale */
    gsl_set_error_handler_off();
    return rf_command_main(argc, argv, commands);
}
