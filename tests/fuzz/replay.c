/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Gives a fuzz target every file of the folders named (and of folders in them): what was once found stays
 * mended. usage: fuzz_replay_TARGET FOLDER... */
#include "fuzz.h"

#include <dirent.h>
#include <string.h>
#include <sys/stat.h>

static int files;

static void give_file(const char *path)
{
    FILE *file = fopen(path, "rb");
    if (file == NULL || fseek(file, 0, SEEK_END) != 0) {
        perror(path);
        exit(2);
    }
    long size = ftell(file);
    rewind(file);
    uint8_t *bytes = malloc(size > 0 ? (size_t)size : 1); /* to the byte, so that a look beyond is seen */
    if (size < 0 || bytes == NULL || fread(bytes, 1, (size_t)size, file) != (size_t)size) {
        perror(path);
        exit(2);
    }
    fclose(file);
    LLVMFuzzerTestOneInput(bytes, (size_t)size);
    free(bytes);
    files++;
}

static void give_folder(const char *path)
{
    DIR *folder = opendir(path);
    if (folder == NULL) {
        perror(path);
        exit(2);
    }
    for (struct dirent *entry = readdir(folder); entry != NULL; entry = readdir(folder)) {
        char below[4096];
        struct stat info;
        if (entry->d_name[0] == '.')
            continue;
        snprintf(below, sizeof below, "%s/%s", path, entry->d_name);
        if (stat(below, &info) == 0 && S_ISDIR(info.st_mode))
            give_folder(below);
        else
            give_file(below);
    }
    closedir(folder);
}

int main(int argc, char **argv)
{
    LLVMFuzzerTestOneInput((const uint8_t *)"", 0);
    for (int i = 1; i < argc; i++)
        give_folder(argv[i]);
    printf("%d passed, %d failed\n", files, files == 0);
    return files == 0;
}
