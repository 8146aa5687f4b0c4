#include "cli/command.h"

#include <gsl/gsl_errno.h>
#include <locale.h>

int main(int argc, char **argv)
{
    setlocale(LC_CTYPE, ""); /* file names as the terminal writes them; numbers stay in the C locale */
    gsl_set_error_handler_off();
    return rf_command_main(argc, argv);
}
