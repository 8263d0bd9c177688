//! Tells paths that would open a network connection; opens nothing itself.

/// Folders of the raster library's virtual file system that are reached over the network.
const REMOTE_FOLDERS: [&str; 9] =
    ["/vsicurl", "/vsis3", "/vsigs", "/vsiaz", "/vsiadls", "/vsioss", "/vsiswift", "/vsihdfs", "/vsiwebhdfs"];

/// What may follow the name of such a folder.
const AFTER_FOLDER: [&str; 3] = ["/", "?", "_streaming"];

/// Beginnings of texts that name a server, a service or a database.
const REMOTE_BEGINNINGS: [&str; 45] = [
    "http:",
    "https:",
    "ftp:",
    "ftps:",
    "s3:",
    "gs:",
    "az:",
    "wms:",
    "wmts:",
    "wcs:",
    "wfs:",
    "wfs3:",
    "wps:",
    "csw:",
    "oapif:",
    "oapif_collection:",
    "ogcapi:",
    "eeda:",
    "eedai:",
    "plmosaic:",
    "plscenes:",
    "ngw:",
    "daas:",
    "iip:",
    "stacit:",
    "stacta:",
    "pg:",
    "pgb:",
    "postgres:",
    "postgresql:",
    "postgis:",
    "mysql:",
    "mariadb:",
    "mssql:",
    "oci:",
    "oracle:",
    "georaster:",
    "hana:",
    "odbc:",
    "mongodb:",
    "mongodbv3:",
    "es:",
    "couchdb:",
    "carto:",
    "amigocloud:",
];

/// Inline descriptions of a service in place of a path.
const REMOTE_DESCRIPTIONS: [&str; 5] = ["<gdal_wms", "<wms_", "<gdal_wmts", "<wcs_", "<ogrwfs"];

/// Schemes before `://` that stay on this machine.
const LOCAL_SCHEMES: [&str; 2] = ["file", "vrt"];

/// Whether opening `path` would open a network connection: a web address, a folder of the virtual
/// file system reached over the network (nested ones too), a service or a database.
pub fn is_remote(path: &str) -> bool {
    let path = path.trim().to_lowercase();
    let path = path.as_str();
    REMOTE_FOLDERS.iter().any(|folder| names_folder(path, folder))
        || REMOTE_BEGINNINGS.iter().any(|beginning| path.starts_with(beginning))
        || REMOTE_DESCRIPTIONS.iter().any(|beginning| path.starts_with(beginning))
        || names_scheme(path)
}

/// The first source of a virtual raster or vector (XML) that lies on a network.
pub(super) fn remote_source(xml: &str) -> Option<&str> {
    xml.split('<').find_map(|element| {
        let (tag, text) = element.split_once('>')?;
        let name = tag.split_whitespace().next().unwrap_or_default().to_lowercase();
        let source = ["source", "filename", "dataset"].iter().any(|word| name.contains(word));
        let inline = is_remote(&format!("<{name}"));
        (inline || source && is_remote(text)).then(|| if inline { tag } else { text.trim() })
    })
}

fn names_folder(path: &str, folder: &str) -> bool {
    path.match_indices(folder).any(|(at, _)| {
        let rest = &path[at + folder.len()..];
        AFTER_FOLDER.iter().any(|after| rest.starts_with(after))
    })
}

/// Whether a scheme other than a local one stands before `://` anywhere in the path.
fn names_scheme(path: &str) -> bool {
    path.match_indices("://").any(|(at, _)| {
        let scheme = path[..at].rsplit(|c: char| !c.is_ascii_alphanumeric()).next().unwrap_or_default();
        !scheme.is_empty() && !LOCAL_SCHEMES.contains(&scheme)
    })
}

#[cfg(test)]
mod tests {
    use super::{is_remote, remote_source};

    #[test]
    fn refuses_what_needs_a_network() {
        for path in [
            "/vsicurl/http://example.org/a.tif",
            "/vsicurl_streaming/http://example.org/a.tif",
            "/vsicurl?use_head=no&url=x",
            "/vsizip//vsicurl/example.org/a.zip/a.shp",
            "/vsizip/{/vsis3/bucket/a.zip}/a.shp",
            "/vsis3/bucket/a.tif",
            "/vsis3_streaming/bucket/a.tif",
            "/vsigs/b/a",
            "/vsiaz/b/a",
            "/vsiadls/b/a",
            "/vsioss/b/a",
            "/vsiswift/b/a",
            "/vsihdfs/b/a",
            "/vsiwebhdfs/b/a",
            "/VSICURL/x",
            "http://example.org/a.tif",
            " https://example.org/a.tif",
            "HTTP://example.org",
            "ftp:a",
            "s3://bucket/a",
            "vrt://http://example.org/a.tif",
            "WMS:http://example.org",
            "WMTS:x",
            "WCS:x",
            "PG:dbname=x",
            "postgresql://x",
            "MySQL:x",
            "mysql:x",
            "<GDAL_WMS><Service/></GDAL_WMS>",
        ] {
            assert!(is_remote(path), "{path}");
        }
    }

    #[test]
    fn lets_files_of_this_machine_pass() {
        for path in [
            "roads.gpkg",
            "../data/a b.tif",
            "/srv/data/roads.gpkg",
            "C:\\data\\a.tif",
            "/vsizip/a.zip/a.shp",
            "/vsigzip/a.csv.gz",
            "file:///srv/a.tif",
            "vrt://a.tif?bands=1",
            "https.tif",
            "data/vsicurl.tif",
            "NETCDF:\"a.nc\":t",
            "GPKG:a.gpkg:t",
            "über/ß.tif",
        ] {
            assert!(!is_remote(path), "{path}");
        }
    }

    #[test]
    fn sources_inside_a_virtual_file() {
        let inside = |what: &str| {
            format!(
                "<VRTDataset><!-- see http://a.example --><SourceFilename relativeToVRT=\"0\">{what}</SourceFilename></VRTDataset>"
            )
        };
        assert_eq!(
            remote_source(&inside("/vsicurl/http://a.example/x.tif")),
            Some("/vsicurl/http://a.example/x.tif")
        );
        assert_eq!(remote_source(&inside("photo.jpg")), None);
        assert!(remote_source("<GDAL_WMS><Service name=\"TMS\"/></GDAL_WMS>").is_some());
    }
}
