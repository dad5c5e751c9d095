/* `pulsewright-bridge site` and `enrol`: who may sign here. */
#include "bridge/gate/site.h"
#include "bridge/command/commands.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static const struct option site_options[] = {
    {"--passphrase-fd", "N", "read the passphrase as a line from this descriptor, not from the terminal"},
    {NULL, NULL, NULL}};

static enum status passphrase_from(const struct arguments *arguments, const char *prompt, char **passphrase,
                                   struct message *why)
{
    double from = -1;
    const enum status status = argument_number(arguments, "--passphrase-fd", 0, 1000, &from);
    return status == STATUS_OK ? passphrase_read((int)from, prompt, passphrase, why) : status;
}

static enum status make_site(const char *folder, const char *secret_path, const char *passphrase,
                             struct message *why)
{
    struct secret_key *key = NULL;
    enum status status = key_make(&key, why);
    if (status == STATUS_OK) status = key_save(key, secret_path, passphrase, KEY_COST_MODERATE, why);
    if (status == STATUS_OK) status = site_begin(folder, key, why);
    key_free(key);
    return status;
}

static enum status run_site(const struct arguments *arguments)
{
    struct message why = {""};
    char *passphrase = NULL, secret_path[700];
    const char *folder = arguments->positional[0];
    if (keys_begin(&why) != STATUS_OK) return command_fail(arguments, STATUS_INTERNAL, "%s", why.text);
    (void)snprintf(secret_path, sizeof secret_path, "%.600s/site.key", folder);
    if (mkdir(folder, 0700) != 0 && access(folder, W_OK) != 0)
        return command_fail(arguments, STATUS_USAGE, "%s: can not be written", folder);
    const bool installed = access(site_folder(), W_OK) == 0 || (mkdir(site_folder(), 0755) == 0);
    enum status status = passphrase_from(arguments, "New passphrase of the site key: ", &passphrase, &why);
    if (status == STATUS_OK)
        status = make_site(installed ? site_folder() : folder, secret_path, passphrase, &why);
    passphrase_free(passphrase);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    printf("site key: %s (keep it off this computer)\n", secret_path);
    if (installed)
        printf("public half and list of signers: %s\n", site_folder());
    else
        printf("public half and list of signers: %s/site.public, %s/signers, %s/serial\n"
               "As root, copy these three into %s, owned by root and writable by nobody else.\n",
               folder, folder, folder, site_folder());
    return STATUS_OK;
}

const struct command command_site = {
    .name = "site",
    .usage = "DIR [--passphrase-fd N]",
    .summary = "makes a site's key, once: it signs the list of who may sign here",
    .help = "The secret half is written to DIR/site.key under a passphrase. Its public half and the empty "
            "list of signers go\n"
            "into the folder that is compiled in, where this computer looks for them.",
    .options = site_options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run_site};

static const struct option enrol_options[] = {
    {"--role", "R",
     "clinician (signs all), engineer (rehearsals), study-lead (starts and sessions; a clinician still "
     "signs)"},
    {"--withdraw", NULL, "this signer signs no more"},
    {"--site-key", "FILE", "the site's secret key (site.key unless said)"},
    {"--key", "FILE", "where the signer's secret key goes (SIGNER.key unless said)"},
    {"--list", "DIR", "a folder with site.public and signers, where the compiled-in one can not be written"},
    {"--passphrase-fd", "N",
     "read passphrases as lines from this descriptor: the site's, then the new signer's"},
    {NULL, NULL, NULL}};

static enum status add_signer(struct site *site, const char *name, enum signer_role role,
                              const char *key_path, const char *passphrase, struct message *why)
{
    struct secret_key *key = NULL;
    if (site->signers == SITE_SIGNERS_MAX)
        return status_fail(why, STATUS_REFUSED, "the list holds %d signers", SITE_SIGNERS_MAX);
    enum status status = key_make(&key, why);
    if (status == STATUS_OK) status = key_save(key, key_path, passphrase, KEY_COST_MODERATE, why);
    if (status == STATUS_OK) {
        struct signer *signer = &site->signer[site->signers++];
        (void)snprintf(signer->name, sizeof signer->name, "%s", name);
        signer->role = role;
        memcpy(signer->public_key, key_public(key), KEY_PUBLIC_SIZE);
    }
    key_free(key);
    return status;
}

static bool is_code(const char *name)
{
    const size_t length = strspn(name, "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789-_.");
    return length > 0 && length == strlen(name) && length < SIGNER_NAME_SIZE;
}

static enum status change_list(const struct arguments *arguments, struct site *site,
                               const struct secret_key *site_key, struct message *why)
{
    const char *name = arguments->positional[0], *role_text = argument(arguments, "--role"),
               *key_path = argument(arguments, "--key");
    const struct signer *known = site_signer(site, name);
    char own_path[SIGNER_NAME_SIZE + 8], *passphrase = NULL;
    enum signer_role role = ROLE_CLINICIAN;
    if (argument_given(arguments, "--withdraw")) {
        if (!known) return status_fail(why, STATUS_REFUSED, "%s is no signer of this site", name);
        site->signer[known - site->signer].withdrawn = true;
        return site_save(site, site_key, why);
    }
    if (known)
        return status_fail(why, STATUS_REFUSED, "%s is listed already%s", name,
                           known->withdrawn ? " (withdrawn); enrol under a new code" : "");
    if (!role_text || !role_read(role_text, &role) || role == ROLE_REHEARSAL)
        return status_fail(why, STATUS_USAGE, "--role may hold clinician, engineer or study-lead");
    (void)snprintf(own_path, sizeof own_path, "%s.key", name);
    enum status status = passphrase_from(arguments, "New passphrase of the signer: ", &passphrase, why);
    if (status == STATUS_OK)
        status = add_signer(site, name, role, key_path ? key_path : own_path, passphrase, why);
    passphrase_free(passphrase);
    if (status == STATUS_OK) status = site_save(site, site_key, why);
    if (status == STATUS_OK)
        printf("%s enrolled as %s; secret key in %s\n", name, role_text, key_path ? key_path : own_path);
    return status;
}

static enum status run_enrol(const struct arguments *arguments)
{
    struct message why = {""};
    struct secret_key *site_key = NULL;
    char *passphrase = NULL;
    const char *folder = argument(arguments, "--list") ? argument(arguments, "--list") : site_folder();
    const char *site_path =
        argument(arguments, "--site-key") ? argument(arguments, "--site-key") : "site.key";
    if (!is_code(arguments->positional[0]))
        return command_fail(arguments, STATUS_USAGE,
                            "\"%s\": a signer is a code of letters, digits and dashes",
                            arguments->positional[0]);
    if (keys_begin(&why) != STATUS_OK) return command_fail(arguments, STATUS_INTERNAL, "%s", why.text);
    struct site *site = calloc(1, sizeof *site);
    enum status status =
        site ? site_load(folder, false, site, &why) : status_fail(&why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK)
        status = passphrase_from(arguments, "Passphrase of the site key: ", &passphrase, &why);
    if (status == STATUS_OK) status = key_load(site_path, passphrase, &site_key, &why);
    passphrase_free(passphrase);
    if (status == STATUS_OK) status = change_list(arguments, site, site_key, &why);
    if (status == STATUS_OK) printf("list of signers: %s/signers, serial %lu\n", folder, site->serial);
    key_free(site_key);
    free(site);
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

const struct command command_enrol = {
    .name = "enrol",
    .usage = "SIGNER (--role R | --withdraw) [--site-key FILE] [--key FILE] [--passphrase-fd N]",
    .summary = "adds a signer to the site's list, or withdraws one",
    .options = enrol_options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run_enrol};
