#!/usr/bin/python3
"""Makes corpus D: descriptions of Debian packages with the tags their editors gave.

Sources, all from the archive's own lists (section main of the release that runs here):
- `Tag:` in Packages, kept by the Debtags project; known to be incomplete;
- the English descriptions in i18n/Translation-en, found by their Description-md5.
Every package that has tags is one item. Title: name and short description; text: long description.
"""

import argparse
import glob
import os
import platform
import subprocess
import sys
import tempfile

import corpus

FETCH_CAP_S = 600


def unavailable(reason):
    """Ends the program: D cannot be made here."""
    corpus.unavailable(f"Corpus D was not made: {reason}.")


def fetch(folder):
    """Lets apt-get fetch the lists, with English descriptions, into `folder`; the system's own stay as they are.

    Returns its first complaint, or "". A source of no interest here may fail: what came is for find_lists to judge.
    """
    os.chmod(folder, 0o755)  # apt-get downloads as a user of its own
    command = ["apt-get", "-q", "-o", "Acquire::Languages=en", "-o", f"Dir::State::Lists={folder}",
               "-o", f"Dir::Cache={folder}", "update"]
    try:
        done = subprocess.run(command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True,
                              timeout=FETCH_CAP_S, check=False)
    except (OSError, subprocess.TimeoutExpired) as error:
        unavailable(f"the package lists cannot be fetched ({error})")
    return next(iter(done.stderr.splitlines()), "")


def find_lists(folder, complaint=""):
    """Paths of the lists (Packages, Translation-en) of this release's section main; updates to it left out."""
    release = platform.freedesktop_os_release().get("VERSION_CODENAME", "*")
    for packages in sorted(glob.glob(f"{folder}/*_dists_{release}_main_binary-*_Packages*")):
        archive = packages[:packages.rindex("_binary-")]
        for descriptions in glob.glob(f"{archive}_i18n_Translation-en*"):
            return packages, descriptions
    unavailable(f"there is no list of the packages in main with English descriptions for the release {release}"
                + (f" ({complaint})" if complaint else ""))
    return None


def stanzas(path):
    """The stanzas of a control file as dictionaries (Debian Policy, chapter 5); apt's helper undoes the compression."""
    text = subprocess.run(["/usr/lib/apt/apt-helper", "cat-file", path],
                          stdout=subprocess.PIPE, check=True).stdout.decode()
    for block in text.split("\n\n"):
        fields, name = {}, None
        for line in block.splitlines():
            if line[0] in " \t":
                fields[name] += "\n" + line
            else:
                name, _, value = line.partition(":")
                fields[name] = value.strip()
        if fields:
            yield fields


def paragraphs(lines):
    """The long description as it reads: without the leading space, ` .` as an empty line (Policy 5.6.13)."""
    return "\n".join("" if line.strip() == "." else line[1:] for line in lines)


def item_of(package, description):
    """One item from a package's stanza and its description."""
    short, *long = description.split("\n")
    tags = {tag.strip() for tag in package["Tag"].replace("\n", " ").split(",")}
    return {"id": package["Package"], "title": f"{package['Package']}: {short}", "text": paragraphs(long),
            "tags": sorted(tags - {""})}


def make(packages_path, descriptions_path):
    """All items; of a package that stands in the list in two versions, the last."""
    descriptions = {fields["Description-md5"]: fields["Description-en"] for fields in stanzas(descriptions_path)}
    items = {fields["Package"]: item_of(fields, descriptions[fields["Description-md5"]])
             for fields in stanzas(packages_path)
             if "Tag" in fields and fields["Description-md5"] in descriptions}
    return list(items.values())


def main():
    parser = argparse.ArgumentParser(description="Makes corpus D from Debian's package lists.")
    parser.add_argument("output", nargs="?", default="build/corpora/D.jsonl")
    parser.add_argument("--lists", metavar="FOLDER", help="package lists already fetched, with English descriptions")
    options = parser.parse_args()
    if options.lists:
        items = make(*find_lists(options.lists))
    else:
        with tempfile.TemporaryDirectory(prefix="undertag-lists-") as folder:
            items = make(*find_lists(folder, fetch(folder)))
    corpus.write("D", items, options.output)


if __name__ == "__main__":
    sys.exit(main())
