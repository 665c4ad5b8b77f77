"""The studies that come with the package, one file each; see rigbench.campaign.study."""
